# Makes `rotation.json`: rotated loadings of principal components of open data (the correlation
# matrices Harman74.cor and ability.cov and the data set iris that ship with R, Harman.8 of psych),
# by R's varimax (singular value decompositions of the whole gradient) with a promax step written out
# after it, and by GPArotation's gradient projection; the orthogonal ones from a Crawford-Ferguson criterion where the
# library has it, which is another formula. Starts are random, and the best of 4 is kept.
#
#     Rscript rotation.R
#
# Needs GPArotation and psych. It is never run by the tests; they read the file it wrote.

suppressMessages({library(GPArotation); library(psych)})
set.seed(20)

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}

structure_of <- function(r, k) {
  e <- eigen(r, symmetric = TRUE)
  e$vectors[, 1:k] %*% diag(sqrt(e$values[1:k]))
}

best <- function(run) {
  found <- list(run(NULL))
  k <- ncol(found[[1]]$loadings)
  for (i in 1:3) found[[i + 1]] <- run(Random.Start(k))
  value <- sapply(found, function(f) f$Table[nrow(f$Table), 2])
  NULL
  found[[which.min(value)]]
}

# Undoes and redoes Kaiser's normalisation here, since a package may do it in its own way.
rotated <- function(a, kaiser, run) {
  h <- if (kaiser) sqrt(rowSums(a^2)) else rep(1, nrow(a))
  f <- best(function(start) run(a / h, start))
  loadings <- unclass(f$loadings) * h
  phi <- if (is.null(f$Phi)) diag(ncol(a)) else f$Phi
  list(loadings = loadings, phi = phi)
}

gp <- list(eps = 1e-8, maxit = 1000)
start_of <- function(start, k) if (is.null(start)) diag(k) else start
orthogonal <- function(method, args = NULL) function(a, start) {
  suppressWarnings(GPForth(a, Tmat = start_of(start, ncol(a)), method = method, methodArgs = args,
                           eps = gp$eps, maxit = gp$maxit))
}
oblimin_of <- function(gam) function(a, start) {
  suppressWarnings(GPFoblq(a, Tmat = start_of(start, ncol(a)), method = "oblimin",
                           methodArgs = list(gam = gam), eps = gp$eps, maxit = gp$maxit))
}

case <- function(name, a, rotation, by, kaiser, result, gamma = 0, power = 4) {
  sprintf(
    '{"name": "%s", "by": "%s", "rotation": "%s", "kaiser": %s, "gamma": %g, "power": %g, "loadings": %s, "phi": %s}',
    name, by, rotation, if (kaiser) "true" else "false", gamma, power,
    rows(result$loadings), rows(result$phi)
  )
}

matrices <- list(
  "Harman74.cor, 4 components" = structure_of(Harman74.cor$cov, 4),
  "ability.cov, 2 components" = structure_of(cov2cor(ability.cov$cov), 2),
  "Harman.8, 2 components" = structure_of(Harman.8, 2),
  "iris, 3 components" = structure_of(cor(iris[, 1:4]), 3)
)
cases <- list()
add <- function(...) cases[[length(cases) + 1]] <<- case(...)
for (name in names(matrices)) {
  a <- matrices[[name]]
  p <- nrow(a); k <- ncol(a)
  for (kaiser in c(TRUE, FALSE)) {
    v <- varimax(a, normalize = kaiser, eps = 1e-15)
    add(name, a, "varimax", "R varimax", kaiser, list(loadings = v$loadings, phi = diag(k)))
    add(name, a, "quartimax", "GPArotation quartimax", kaiser,
        rotated(a, kaiser, orthogonal("quartimax")))
    add(name, a, "equamax", "GPArotation Crawford-Ferguson, kappa = k/(2p)", kaiser,
        rotated(a, kaiser, orthogonal("cf", list(kappa = k / (2 * p)))))
    if (!(grepl("iris", name))) {
      for (gam in c(0, -0.5))
        add(name, a, "oblimin", "GPArotation oblimin", kaiser, rotated(a, kaiser, oblimin_of(gam)),
            gamma = gam)
    }
  }
  # R's promax normalises for its first step only; here no step does, so the second is written out,
  # as a least-squares fit of a QR decomposition.
  v <- unclass(varimax(a, normalize = FALSE, eps = 1e-15)$loadings)
  for (power in c(2, 4)) {
    u <- lm.fit(v, v * abs(v)^(power - 1))$coefficients
    u <- u %*% diag(sqrt(diag(solve(t(u) %*% u))))
    add(name, a, "promax", "R varimax and lm.fit", FALSE,
        list(loadings = v %*% u, phi = solve(t(u) %*% u)), power = power)
  }
}
sets <- sapply(names(matrices), function(name) sprintf('"%s": %s', name, rows(matrices[[name]])))

cat(
  sprintf('{"versions": {"R": "%s", "GPArotation": "%s", "psych": "%s"}, "matrices": {%s}, "cases": [\n%s\n]}\n',
          getRversion(), packageVersion("GPArotation"), packageVersion("psych"),
          paste(sets, collapse = ", "), paste(unlist(cases), collapse = ",\n")),
  file = "rotation.json"
)
