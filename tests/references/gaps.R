# Makes `gaps_cross_validation.json`: generalised cross-validation errors of components of complete
# tables, by the package FactoMineR, on data sets that ship with R.
#
#     Rscript gaps.R
#
# It is never run by the tests; they read the file it wrote. FactoMineR brings columns to unit
# standard deviation as its argument `scale` says.

suppressMessages(library(FactoMineR))

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}

case <- function(name, x, most, correlation) {
  fit <- estim_ncp(x, ncp.min = 0, ncp.max = most, scale = correlation, method = "GCV")
  paste0(
    "{\"name\": \"", name, "\", \"by\": \"FactoMineR estim_ncp, GCV\", \"scaling\": \"",
    if (correlation) "correlation" else "covariance",
    "\", \"data\": ", rows(x), ", \"errors\": ", vector(fit$criterion),
    ", \"n_components\": ", fit$ncp, "}"
  )
}

cases <- c(
  case("USArrests", USArrests, 2, FALSE),
  case("USArrests", USArrests, 2, TRUE),
  case("swiss", swiss, 4, TRUE)
)
versions <- sprintf(
  "{\"R\": \"%s\", \"FactoMineR\": \"%s\"}", getRversion(), packageVersion("FactoMineR")
)
writeLines(
  sprintf("{\"versions\": %s, \"cases\": [%s]}", versions, paste(cases, collapse = ", ")),
  "gaps_cross_validation.json"
)
