# Makes `comparison.json`: congruence coefficients by psych, and Procrustes comparisons and a
# permutation test by vegan, of components of open data that ship with R (iris species against one
# another; USArrests, correlation against covariance).
#
#     Rscript comparison.R
#
# Needs psych and vegan. It is never run by the tests; they read the file it wrote.

suppressMessages({library(psych); library(vegan)})
set.seed(20)

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}
structure_of <- function(x, k) {
  e <- eigen(cor(x), symmetric = TRUE)
  e$vectors[, 1:k] %*% diag(sqrt(e$values[1:k]))
}

setosa <- structure_of(iris[iris$Species == "setosa", 1:4], 3)
virginica <- structure_of(iris[iris$Species == "virginica", 1:4], 3)
x <- prcomp(USArrests, scale. = TRUE)$x[, 1:2]
y <- prcomp(USArrests, scale. = FALSE)$x[, 2:3]
y <- y + matrix(c(3, -7), 50, 2, byrow = TRUE)

fit <- function(scale) {
  f <- procrustes(x, y, scale = scale)
  sprintf('{"scaling": %s, "rotation": %s, "scale": %.17g, "translation": %s, "residual": %.17g, "fitted": %s, "residuals": %s}',
          if (scale) "true" else "false", rows(f$rotation), f$scale, vector(f$translation), f$ss,
          rows(fitted(f)[1:5, ]), vector(residuals(f)[1:5]))
}
# Shuffled against the rest, so that the p-value is neither 0 nor 1.
z <- x[c(26:50, 1:25), ]
tests <- lapply(list(y, z), function(other) {
  t <- protest(x, other, permutations = 99999)
  sprintf('{"other": %s, "correlation": %.17g, "m_squared": %.17g, "p_value": %.17g, "permutations": 99999}',
          rows(other), t$t0, t$ss, t$signif)
})

cat(
  sprintf('{"versions": {"R": "%s", "psych": "%s", "vegan": "%s"}, "congruence": {"first": %s, "second": %s, "coefficients": %s}, "x": %s, "y": %s, "procrustes": [%s], "tests": [%s]}\n',
          getRversion(), packageVersion("psych"), packageVersion("vegan"),
          rows(setosa), rows(virginica), rows(factor.congruence(setosa, virginica, digits = 15)),
          rows(x), rows(y), paste(c(fit(TRUE), fit(FALSE)), collapse = ", "),
          paste(unlist(tests), collapse = ", ")),
  file = "comparison.json"
)
