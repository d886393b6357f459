# Makes `transform.json`: transformations of data sets that ship with R.
#
#     Rscript transform.R
#
# Needs R and MASS. It is never run by the tests; they read the file it wrote. The profile
# likelihood is that of MASS::boxcox (residuals of a linear model of the mean alone), the exponent
# that of a golden-section search over it, the interval where it falls 1.92 below its maximum;
# standardising is R's scale, median and mad, and the linear model with row weights is lm's.

suppressMessages(library(MASS))

number <- function(x) paste(sprintf("%.17g", x), collapse = ", ")
vector <- function(x) sprintf("[%s]", number(x))

likelihood <- function(x, lambda) {
  boxcox(lm(x ~ 1, y = TRUE, qr = TRUE), lambda = lambda, plotit = FALSE, interp = FALSE)$y
}

power_case <- function(name, x) {
  x <- x[!is.na(x)]
  lambdas <- c(-2, -1, -0.5, 0, 0.25, 0.5, 1, 2)
  l <- function(lambda) likelihood(x, lambda)
  best <- optimize(l, c(-5, 5), maximum = TRUE, tol = 1e-9)
  fall <- function(lambda) best$objective - l(lambda) - qchisq(0.95, 1) / 2
  lower <- uniroot(fall, c(-5, best$maximum), tol = 1e-10)$root
  upper <- uniroot(fall, c(best$maximum, 5), tol = 1e-10)$root
  paste0(
    "{\"name\": \"", name, "\", \"values\": ", vector(x), ", \"exponent\": ", number(best$maximum),
    ", \"interval\": ", vector(c(lower, upper)), ", \"lambdas\": ", vector(lambdas),
    ", \"above_untransformed\": ", vector(likelihood(x, lambdas) - likelihood(x, 1)), "}"
  )
}

spread_case <- function(name, x, w) {
  paste0(
    "{\"name\": \"", name, "\", \"values\": ", vector(x), ", \"weights\": ", vector(w),
    ", \"mean\": ", number(mean(x)), ", \"deviation\": ", number(sd(x)),
    ", \"median\": ", number(median(x)), ", \"mad\": ", number(mad(x)),
    ", \"scaled\": ", vector(scale(x)[1:5]),
    ", \"robust\": ", vector(((x - median(x)) / mad(x))[1:5]),
    ", \"weighted_mean\": ", number(weighted.mean(x, w)),
    # Divisor n - 1 with weights that sum to n: that of a linear model of the mean alone.
    ", \"weighted_deviation\": ", number(summary(lm(x ~ 1, weights = w / mean(w)))$sigma), "}"
  )
}

cat(
  "{\"versions\": {\"R\": \"", as.character(getRversion()), "\", \"MASS\": \"",
  as.character(packageVersion("MASS")), "\"}, \"powers\": [",
  power_case("trees, Volume", trees$Volume), ", ",
  power_case("airquality, Ozone", airquality$Ozone), ", ",
  power_case("USArrests, Rape", USArrests$Rape), ", ",
  power_case("rivers", rivers), "], \"spreads\": [",
  spread_case("USArrests, Assault", USArrests$Assault, USArrests$UrbanPop), ", ",
  spread_case("USArrests, Murder", USArrests$Murder, USArrests$Assault), ", ",
  spread_case("trees, Volume", trees$Volume, trees$Girth), "]}\n",
  file = "transform.json", sep = ""
)
