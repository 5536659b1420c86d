# Writes multivariate_t.csv with R's mvtnorm: probabilities outside a rectangle with one c for all variables.
# Three variables one-sided by TVPACK (Genz 2004, an exact method, good to about 1e-14); the others by GenzBretz with its own error bound.
# Columns: sides, df (0: normal), c, probability outside, its error bound, lower triangle of the correlations by rows. Run: Rscript multivariate_t.R
suppressPackageStartupMessages(library(mvtnorm))
lines <- "sides,df,c,value,error,correlations"
put <- function(sides, df, c, R, algorithm) {
  k <- nrow(R); set.seed(20261201)
  p <- pmvt(if (sides == "two") rep(-c, k) else rep(-Inf, k), rep(c, k), df = df, corr = R, algorithm = algorithm)
  error <- if (inherits(algorithm, "TVPACK")) 1e-13 else attr(p, "error")
  lines <<- c(lines, sprintf("%s,%g,%.17g,%.17g,%.3g,%s", sides, df, c, 1 - p, error, paste(sprintf("%.17g", R[upper.tri(R)]), collapse = " ")))
}
three <- function(a, b, c) matrix(c(1, a, b, a, 1, c, b, c, 1), 3)
for (R in list(three(.5, -.3, .2), three(-.4, .6, .1), three(.9, .2, -.1), three(-.3, -.3, -.3)))
  for (df in c(0, 4, 17)) for (c in c(.4, 2.3)) put("one", df, c, R, TVPACK())
pairs <- function(n) {
  e <- combn(length(n), 2); C <- t(apply(e, 2, function(x) { v <- numeric(length(n)); v[x] <- c(1, -1); v }))
  cov2cor(C %*% diag(1 / n) %*% t(C))
}
ar <- function(k, r) r^abs(outer(1:k, 1:k, "-"))
gb <- GenzBretz(maxpts = 1e6, abseps = 2e-6)
for (sides in c("one", "two")) {
  put(sides, 12, 2.7, ar(6, .6), gb); put(sides, 0, 1.5, ar(6, -.5), gb); put(sides, 40, 4.5, ar(10, .7), gb)
  put(sides, 44, 2.5, pairs(c(5, 9, 14, 20)), gb); put(sides, 6, 3.4, pairs(c(3, 4, 3, 2, 6)), gb)
}
writeLines(c("# R's mvtnorm, written by multivariate_t.R", lines), "multivariate_t.csv")
