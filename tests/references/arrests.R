# Makes `arrests.json`: principal components (prcomp, LAPACK's singular value decomposition) and
# column summaries (mean, sd, quantile type 7) of the data set USArrests that ships with R.
#
#     Rscript arrests.R
#
# Only R itself is needed. It is never run by the tests; they read the file it wrote.

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}
strings <- function(x) sprintf("[%s]", paste(sprintf("\"%s\"", x), collapse = ", "))

case <- function(correlation) {
  fit <- prcomp(USArrests, center = TRUE, scale. = correlation)
  paste0(
    "{\"name\": \"USArrests\", \"by\": \"R prcomp\", \"scaling\": \"",
    if (correlation) "correlation" else "covariance",
    "\", \"variables\": ", strings(names(USArrests)),
    ", \"data\": ", rows(USArrests),
    ", \"variances\": ", vector(fit$sdev^2),
    ", \"proportions\": ", vector(fit$sdev^2 / sum(fit$sdev^2)),
    ", \"loadings\": ", rows(fit$rotation),
    ", \"scores\": ", rows(fit$x[1:5, ]), "}"
  )
}

summaries <- sapply(names(USArrests), function(name) {
  x <- USArrests[[name]]
  sprintf(
    "{\"column\": \"%s\", \"mean\": %.17g, \"standard_deviation\": %.17g, \"quartiles\": %s}",
    name, mean(x), sd(x), vector(quantile(x, c(0, 0.25, 0.5, 0.75, 1), type = 7))
  )
})

cat(
  "{\"versions\": {\"R\": \"", as.character(getRversion()), "\"}, \"cases\": [",
  case(TRUE), ", ", case(FALSE), "], \"summaries\": [", paste(summaries, collapse = ", "), "]}\n",
  file = "arrests.json", sep = ""
)
