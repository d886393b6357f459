# The other peer of `speed.rs`: prints the smallest and the median time in milliseconds, and the way.
#
#     Rscript speed.R noise|bootstrap|scatter N P
#
# Base R, and robustbase for the scatter.

words <- commandArgs(trailingOnly = TRUE)
n <- as.integer(words[2])
p <- as.integer(words[3])
set.seed(1)
x <- 5 + matrix(rnorm(n * p), n) %*% diag(1 + (seq_len(p) - 1) / p)

work <- switch(words[1],
  noise = list("R, eigen of cor of whole tables", function() {
    for (i in 1:1000) eigen(cor(matrix(rnorm(n * p), n)), TRUE, only.values = TRUE)
  }),
  bootstrap = list("R, loop over resamples", function() {
    for (i in 1:2000) eigen(cor(x[sample.int(n, n, TRUE), ]), TRUE)
  }),
  scatter = list("R, robustbase covMcd", function() robustbase::covMcd(x))
)
times <- sort(replicate(3, system.time(work[[2]]())[["elapsed"]] * 1e3))
cat(times[1], times[2], work[[1]], "\n")
