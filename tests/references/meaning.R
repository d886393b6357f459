# Makes `meaning.json`: contributions, squared cosines, supplementary columns and groups (FactoMineR),
# communalities (psych), and components of weighted rows (cov.wt and eigen, FactoMineR, ade4) of the
# wine data that `components.json` holds: the first 11 columns are analysed, the others and the
# three growers, whose rows follow one another, are supplementary.
#
#     Rscript meaning.R
#
# Needs the packages jsonlite, FactoMineR, psych and ade4. It is never run by the tests; they read the file it
# wrote. FactoMineR divides by n, so its scores are larger than ours by the root of n / (n - 1) under
# correlation; contributions, cosines, correlations and test values do not depend on that.

suppressPackageStartupMessages({library(FactoMineR); library(ade4)})

cases <- jsonlite::fromJSON("components.json", simplifyVector = FALSE)$cases
wine <- Filter(function(case) case$name == "wine", cases)[[1]]
x <- do.call(rbind, lapply(wine$data, unlist))
colnames(x) <- paste0("V", seq_len(ncol(x)))
active <- 1:11
other <- 12:13
grower <- factor(rep(c("first", "second", "third"), c(59, 71, 48)))
weights <- 1 + (seq_len(nrow(x)) - 1) %% 4
shown <- 1:8

case <- function(correlation, weighted) {
  w <- if (weighted) weights else rep(1, nrow(x))
  table <- data.frame(x, grower = grower)
  fit <- PCA(
    table, scale.unit = correlation, ncp = length(active), quanti.sup = other,
    quali.sup = ncol(table), row.w = w, graph = FALSE
  )
  moments <- cov.wt(x[, active], wt = w / sum(w), cor = TRUE, method = "ML")
  unbiased <- cov.wt(x[, active], wt = w / sum(w), method = "unbiased")
  spectrum <- eigen(if (correlation) moments$cor else moments$cov, symmetric = TRUE)
  dudi <- dudi.pca(
    as.data.frame(x[, active]), row.w = w / sum(w), scale = correlation, scannf = FALSE,
    nf = length(active)
  )
  inertia <- inertia.dudi(dudi, row.inertia = TRUE, col.inertia = TRUE)
  result <- list(
    scaling = if (correlation) "correlation" else "covariance",
    weights = if (weighted) w else NULL,
    mean = unname(moments$center),
    covariance_divisor_n = unname(moments$cov),
    covariance_unbiased = unname(unbiased$cov),
    roots_divisor_n = spectrum$values,
    loadings = spectrum$vectors,
    variable_contributions = unname(fit$var$contrib) / 100,
    variable_cosines = unname(fit$var$cos2),
    row_contributions = unname(fit$ind$contrib[shown, ]) / 100,
    row_contributions_ade4 = unname(as.matrix(inertia$row.abs)[shown, ]) / 100,
    row_cosines = unname(fit$ind$cos2[shown, ]),
    column_correlations = unname(fit$quanti.sup$cor),
    group_means_divisor_n = unname(fit$quali.sup$coord)
  )
  # Of weighted rows FactoMineR's test values take weights for counts; ours do not.
  if (!weighted) result$group_test_values <- unname(fit$quali.sup$v.test)
  if (correlation && !weighted) {
    components <- psych::principal(x[, active], nfactors = 3, rotate = "none")
    result$communalities_of_three <- unname(components$communality)
  }
  result
}

versions <- list(R = as.character(getRversion()))
for (package in c("FactoMineR", "psych", "ade4")) {
  versions[[package]] <- as.character(packageVersion(package))
}
cases <- list(case(TRUE, FALSE), case(FALSE, FALSE), case(TRUE, TRUE), case(FALSE, TRUE))
jsonlite::write_json(
  list(versions = versions, cases = cases), "meaning.json", digits = I(17), auto_unbox = TRUE,
  null = "null"
)
