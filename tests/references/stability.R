# Makes `stability.json`: adequacy of correlations and normality by the package psych, and a
# bootstrap of correlation and covariance components by hand, of the data set USArrests that ships
# with R, and of attitude, another one.
#
#     Rscript stability.R
#
# Needs the packages psych and boot. It is never run by the tests; they read the file it wrote.

suppressMessages(library(psych))
library(boot)

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))
rows <- function(m) {
  sprintf("[%s]", paste(apply(unname(as.matrix(m)), 1, vector), collapse = ", "))
}
strings <- function(x) sprintf("[%s]", paste(sprintf("\"%s\"", x), collapse = ", "))

adequacy <- function(name, data) {
  kmo <- KMO(data)
  sphericity <- cortest.bartlett(cor(data), n = nrow(data))
  normal <- mardia(data, plot = FALSE)
  paste0(
    "{\"name\": \"", name, "\", \"by\": \"psych KMO, cortest.bartlett, mardia\"",
    ", \"variables\": ", strings(names(data)), ", \"data\": ", rows(data),
    ", \"overall\": ", number(kmo$MSA), ", \"by_variable\": ", vector(kmo$MSAi),
    ", \"chi_squared\": ", number(sphericity$chisq), ", \"freedom\": ", number(sphericity$df),
    ", \"p_value\": ", number(sphericity$p.value),
    ", \"determinant\": ", number(det(cor(data))),
    ", \"condition_number\": ", number(kappa(cor(data), exact = TRUE)),
    ", \"b1\": ", number(normal$b1p), ", \"skew\": ", number(normal$skew),
    ", \"small_skew\": ", number(normal$small.skew), ", \"p_skew\": ", number(normal$p.skew),
    ", \"p_small\": ", number(normal$p.small),
    ", \"b2\": ", number(normal$b2p), ", \"z\": ", number(normal$kurtosis),
    ", \"p_kurt\": ", number(normal$p.kurt), "}"
  )
}

# Resamples by hand: rows drawn with sample.int, prcomp, signs by the inner product with the
# loadings of the data, components by the order of their variances where the test follows them.
bootstrap <- function(name, data, correlation, replicates = 20000) {
  fit <- prcomp(data, scale. = correlation)
  k <- 2
  p <- ncol(data)
  variances <- matrix(0, replicates, p)
  loadings <- matrix(0, replicates, p * k)
  angle <- numeric(replicates)
  own <- fit$rotation[, 1:k]
  for (b in seq_len(replicates)) {
    again <- prcomp(data[sample.int(nrow(data), replace = TRUE), ], scale. = correlation)
    variances[b, ] <- again$sdev^2
    v <- again$rotation
    congruence <- t(own) %*% v
    # With two components, the better of all ordered pairs of places is found by trying them.
    best <- c(1, 2)
    most <- -1
    for (i in 1:p) for (j in 1:p) if (i != j) {
      total <- abs(congruence[1, i]) + abs(congruence[2, j])
      if (total > most) {
        most <- total
        best <- c(i, j)
      }
    }
    for (c in 1:k) {
      sign <- sign(congruence[c, best[c]])
      loadings[b, (c - 1) * p + 1:p] <- sign * v[, best[c]]
    }
    angle[b] <- acos(min(1, svd(t(own) %*% v[, 1:k])$d[k])) * 180 / pi
  }
  ends <- function(m) apply(m, 2, quantile, probs = c(0.025, 0.975), type = 7)
  paste0(
    "{\"name\": \"", name, "\", \"by\": \"prcomp of resampled rows\", \"scaling\": \"",
    if (correlation) "correlation" else "covariance", "\", \"replicates\": ", replicates,
    ", \"variables\": ", strings(names(data)), ", \"data\": ", rows(data),
    ", \"loadings\": ", rows(own),
    ", \"variance_mean\": ", vector(colMeans(variances)),
    ", \"variance_error\": ", vector(apply(variances, 2, sd)),
    ", \"variance_ends\": ", rows(ends(variances)),
    ", \"loading_mean\": ", vector(colMeans(loadings)),
    ", \"loading_error\": ", vector(apply(loadings, 2, sd)),
    ", \"loading_ends\": ", rows(ends(loadings)),
    ", \"angle_quantiles\": ", vector(quantile(angle, c(0.5, 0.95), type = 7)), "}"
  )
}

# Intervals of the two largest variances by the package boot, with influence values by the jackknife.
corrected <- function(name, data, correlation, replicates = 20000) {
  fit <- function(d, i) prcomp(d[i, ], scale. = correlation)$sdev[1:2]^2
  drawn <- boot(data, fit, R = replicates)
  ends <- sapply(1:2, function(k) {
    influences <- empinf(drawn, index = k, type = "jack")
    boot.ci(drawn, type = "bca", index = k, L = influences)$bca[4:5]
  })
  paste0(
    "{\"name\": \"", name, "\", \"by\": \"boot boot.ci(type = 'bca')\", \"scaling\": \"",
    if (correlation) "correlation" else "covariance", "\", \"replicates\": ", replicates,
    ", \"error\": ", vector(apply(drawn$t, 2, sd)), ", \"ends\": ", rows(ends), "}"
  )
}

set.seed(20)
cat(
  "{\"versions\": {\"R\": \"", as.character(getRversion()), "\", \"psych\": \"",
  as.character(packageVersion("psych")), "\", \"boot\": \"",
  as.character(packageVersion("boot")), "\"}, \"adequacy\": [",
  adequacy("USArrests", USArrests), ", ", adequacy("attitude", attitude), ", ",
  adequacy("trees", log(trees)), "], \"bootstrap\": [",
  bootstrap("attitude", attitude, TRUE), ", ", bootstrap("USArrests", USArrests, FALSE), "], \"corrected\": [",
  corrected("attitude", attitude, TRUE), ", ", corrected("USArrests", USArrests, FALSE), "]}\n",
  file = "stability.json", sep = ""
)
