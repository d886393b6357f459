# Makes `retention_packages.json`: rules for the number of components by R's packages psych,
# nFactors and vegan, on data that ship with R. Never run by the tests.
#
#     apt-get install r-cran-psych r-cran-nfactors r-cran-vegan r-cran-jsonlite
#     Rscript retention.R
suppressMessages({library(psych); library(nFactors); library(vegan); library(jsonlite)})

# Velicer's (1976) first example: eight physical measures of 305 girls (Harman), as a correlation
# matrix; and four tables of raw data.
harman <- Harman23.cor$cov
tables <- list(
  arrests = as.matrix(USArrests),
  attitude = as.matrix(attitude),
  stackloss = as.matrix(stackloss),
  swiss = as.matrix(swiss)
)

rules <- function(correlation, n) {
  p <- ncol(correlation)
  roots <- eigen(correlation, symmetric = TRUE)$values
  scree <- nScree(x = roots)
  tests <- nBartlett(roots, N = n, alpha = 0.05, details = TRUE)
  maps <- suppressWarnings(vss(correlation, n = p, n.obs = n, plot = FALSE, rotate = "none"))$map
  reduced <- correlation
  diag(reduced) <- smc(correlation)
  stick <- as.numeric(bstick(p, tot.var = p))
  list(
    n_rows = n,
    correlation = correlation,
    roots = roots,
    broken_stick = stick,
    acceleration = scree$Analysis$Acc.factor,
    predicted = scree$Analysis$Pred.eig,
    optimal_coordinates = scree$Components$noc,
    map = maps,
    reduced_roots = eigen(reduced, symmetric = TRUE)$values,
    tests = tests$detail
  )
}

cases <- c(
  list(c(list(name = "harman"), rules(harman, 305))),
  lapply(names(tables), function(name) {
    x <- tables[[name]]
    c(list(name = name, data = unname(x)), rules(cor(x), nrow(x)))
  })
)

# Parallel analysis of reduced correlations by psych, which draws whole tables and takes the roots of
# correlation matrices with squared multiple correlations on the diagonal.
set.seed(1)
simulated <- replicate(4000, {
  r <- cor(matrix(rnorm(50 * 6), 50, 6))
  diag(r) <- smc(r)
  eigen(r, symmetric = TRUE)$values
})
parallel <- list(
  n_rows = 50, n_variables = 6, replicates = 4000,
  mean = rowMeans(simulated), deviation = apply(simulated, 1, sd),
  percentile_95 = apply(simulated, 1, quantile, 0.95)
)

versions <- list(
  R = paste(R.version$major, R.version$minor, sep = "."),
  psych = as.character(packageVersion("psych")),
  nFactors = as.character(packageVersion("nFactors")),
  vegan = as.character(packageVersion("vegan"))
)
write_json(
  list(versions = versions, cases = cases, reduced_parallel = parallel),
  "retention_packages.json", digits = NA, auto_unbox = TRUE, na = "null"
)
