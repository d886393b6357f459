# Makes `robust.json`: minimum covariance determinants (robustbase's covMcd), its factors for shapes
# and shares, and robust components (rrcov's PcaHubert, by projections) of data sets that ship with
# those packages and with R.
#
#     Rscript robust.R
#
# Packages: robustbase, rrcov. It is never run by the tests; they read the file it wrote.

suppressMessages({
  library(robustbase)
  library(rrcov)
})

number <- function(x) paste(sprintf("%.15g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}
short_rows <- function(m) {
  text <- function(x) sprintf("[%s]", paste(sprintf("%.8g", x), collapse = ", "))
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, text), collapse = ", "))
}
list_of <- function(items) sprintf("[%s]", paste(items, collapse = ",\n"))

# The search starts from every p + 1 rows where these are few ("exact"), else from many.
scatter <- function(name, x, alpha, nsamp) {
  x <- as.matrix(x)
  set.seed(11)
  fit <- covMcd(x, alpha = alpha, nsamp = nsamp)
  paste0(
    "{\"name\": \"", name, "\", \"share\": ", alpha, ", \"data\": ", rows(x),
    ", \"h\": ", fit$quan, ", \"log_determinant\": ", number(fit$crit),
    ", \"subset\": ", vector(sort(fit$best)),
    ", \"raw_centre\": ", vector(fit$raw.center), ", \"raw_covariance\": ", rows(fit$raw.cov),
    ", \"raw_factors\": ", vector(fit$raw.cnp2),
    ", \"centre\": ", vector(fit$center), ", \"covariance\": ", rows(fit$cov),
    ", \"factors\": ", vector(fit$cnp2),
    ", \"distances\": ", vector(sqrt(mahalanobis(x, fit$center, fit$cov))), ", \"kept\": ", vector(fit$mcd.wt), "}"
  )
}

factors <- function(n, p, alpha) {
  set.seed(1)
  fit <- covMcd(matrix(rnorm(n * p), n), alpha = alpha)
  paste0(
    "{\"n\": ", n, ", \"p\": ", p, ", \"share\": ", alpha, ", \"h\": ", fit$quan,
    ", \"kept\": ", sum(fit$mcd.wt), ", \"raw\": ", vector(fit$raw.cnp2),
    ", \"reweighted\": ", vector(fit$cnp2), "}"
  )
}

components <- function(name, x, k, alpha) {
  x <- as.matrix(x)
  set.seed(11)
  fit <- PcaHubert(x, k = k, alpha = alpha, mcd = FALSE, maxdir = 5000)
  paste0(
    "{\"name\": \"", name, "\", \"share\": ", alpha, ", \"k\": ", k, ", \"data\": ", short_rows(x),
    ", \"variances\": ", vector(fit@eigenvalues), ", \"loadings\": ", short_rows(fit@loadings),
    ", \"centre\": ", vector(fit@center), ", \"score_distances\": ", vector(fit@sd),
    ", \"orthogonal_distances\": ", vector(fit@od),
    ", \"score_limit\": ", number(fit@cutoff.sd),
    ", \"orthogonal_limit\": ", number(fit@cutoff.od), "}"
  )
}

# What the classical components of the same tables say about distances.
classical <- function(name, x, k) {
  x <- as.matrix(x)
  fit <- PcaClassic(x, k = k)
  paste0(
    "{\"name\": \"", name, "\", \"k\": ", k, ", \"data\": ", rows(x),
    ", \"score_distances\": ", vector(fit@sd), ", \"orthogonal_distances\": ", vector(fit@od), "}"
  )
}

data(octane, package = "rrcov")
data(milk, package = "robustbase")
grid <- expand.grid(n = c(20, 60, 300), p = c(1, 2, 3, 6), alpha = c(0.5, 0.75, 0.9))
cat(
  "{\"versions\": {\"R\": \"", as.character(getRversion()),
  "\", \"robustbase\": \"", as.character(packageVersion("robustbase")),
  "\", \"rrcov\": \"", as.character(packageVersion("rrcov")), "\"},\n\"scatter\": ",
  list_of(c(
    scatter("hbk", hbk[, 1:3], 0.5, 5000), scatter("hbk", hbk[, 1:3], 0.75, 5000),
    scatter("wood", wood[, 1:5], 0.5, "exact"), scatter("wood", wood[, 1:5], 0.75, "exact"),
    scatter("stackloss", stackloss[, 1:3], 0.5, "exact"),
    scatter("stackloss", stackloss[, 1:3], 0.75, "exact"),
    scatter("milk", milk, 0.75, 5000),
    scatter("stack.loss", stackloss[, 4, drop = FALSE], 0.5, 500),
    scatter("rivers", matrix(rivers), 0.75, 500)
  )),
  ",\n\"factors\": ", list_of(mapply(factors, grid$n, grid$p, grid$alpha)),
  ",\n\"components\": ",
  list_of(c(
    components("hbk", hbk[, 1:3], 2, 0.75), components("octane", octane[, -1], 2, 0.75),
    components("milk", milk, 3, 0.75)
  )),
  ",\n\"classical\": ",
  list_of(c(classical("hbk", hbk[, 1:3], 2), classical("milk", milk, 3))),
  "}\n",
  file = "robust.json", sep = ""
)
