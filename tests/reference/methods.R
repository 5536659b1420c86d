# Values that the tests with covariates are held to (tests/reference_methods.rs): R's lm, anova.mlm, mauchly.test and
# predict.lm (stats, base R). No line of this project's code runs here.
#
# Data: methods_invented.csv (invented, made by methods.py; three arms, four occasions, covariates z1 and z2) and
# potthoff_roy_1964.csv with the occasion 8 as covariate of the later ones.
#
# Usage: Rscript methods.R > methods_covariates.json, in this folder.

found <- character()
put <- function(name, value, source) {
  found[[length(found) + 1]] <<- sprintf('  {"name": "%s", "value": %.17g, "source": "%s"}', name, as.numeric(value), source)
}

criteria <- c("Pillai", "Wilks", "Hotelling-Lawley", "Roy")

# L B M = 0 by leaving columns out of X, M being the columns of `within`.
hypothesis <- function(name, Y, X, without, within) {
  full <- lm(Y ~ 0 + X)
  X0 <- X[, -without, drop = FALSE]
  less <- lm(Y ~ 0 + X0)
  T <- t(within)
  for (criterion in criteria) {
    row <- as.data.frame(anova(full, less, T = T, test = criterion))[2, ]
    put(paste0(name, "/", criterion, "/value"), row[[criterion]], "stats::anova.mlm")
    put(paste0(name, "/", criterion, "/F"), row[["approx F"]], "stats::anova.mlm")
    put(paste0(name, "/", criterion, "/df1"), row[["num Df"]], "stats::anova.mlm")
    put(paste0(name, "/", criterion, "/df2"), row[["den Df"]], "stats::anova.mlm")
    put(paste0(name, "/", criterion, "/p"), row[["Pr(>F)"]], "stats::anova.mlm")
  }
  row <- as.data.frame(anova(full, less, T = T, test = "Spherical"))[2, ]
  put(paste0(name, "/univariate/F"), row[["F"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/univariate/df1"), row[["num Df"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/univariate/df2"), row[["den Df"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/univariate/p"), row[["Pr(>F)"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/univariate/p_GG"), row[["G-G Pr"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/univariate/p_HF"), row[["H-F Pr"]], "stats::anova.mlm, Spherical")
  put(paste0(name, "/mauchly/W"), mauchly.test(full, T = T)$statistic, "stats::mauchly.test")
}

coefficient <- function(name, fit, which, source = "stats::lm") {
  row <- summary(fit)$coefficients[which, ]
  put(paste0(name, "/estimate"), row[1], source)
  put(paste0(name, "/se"), row[2], source)
  put(paste0(name, "/t"), row[3], source)
  put(paste0(name, "/p"), row[4], source)
  put(paste0(name, "/df"), fit$df.residual, source)
}

# Adjusted means: predictions at the mean of the covariates over the subjects fitted.
adjusted <- function(name, fit, at) {
  predicted <- predict(fit, at, se.fit = TRUE)
  put(paste0(name, "/estimate"), predicted$fit[[1]], "stats::predict.lm")
  put(paste0(name, "/se"), predicted$se.fit[[1]], "stats::predict.lm")
  put(paste0(name, "/df"), fit$df.residual, "stats::predict.lm")
}

# Three arms, four occasions, two covariates.
d <- read.csv("methods_invented.csv")
d$arm <- factor(d$arm, levels = c("a", "b", "c"))
Y <- as.matrix(d[, c("y1", "y2", "y3", "y4")])
z <- scale(as.matrix(d[, c("z1", "z2")]), scale = FALSE)
X <- cbind(1, contr.sum(3)[d$arm, ], z)
changes <- contr.helmert(4)
hypothesis("invented/arm:occasion", Y, X, 2:3, changes)
hypothesis("invented/occasion", Y, X, 1, changes)
whole <- data.frame(arm = factor(levels(d$arm), levels = levels(d$arm)), z1 = mean(d$z1), z2 = mean(d$z2))

mean_over <- rowMeans(Y)
fit <- lm(mean_over ~ arm + z1 + z2, d)
row <- drop1(fit, ~ arm, test = "F")["arm", ]
put("invented/arm/F", row[["F value"]], "stats::drop1")
put("invented/arm/p", row[["Pr(>F)"]], "stats::drop1")
put("invented/arm/df2", fit$df.residual, "stats::drop1")

for (k in 1:4) for (arm in 1:3) {
  fit <- lm(Y[, k] ~ arm + z1 + z2, d)
  adjusted(sprintf("invented/mean/%s/y%d", levels(d$arm)[arm], k), fit, whole[arm, ])
}

for (pair in list(c(1, 2), c(1, 3), c(2, 3))) for (ages in list(c(1, 2), c(2, 4))) {
  name <- sprintf("invented/piece/%s:y%d-y%d", paste(levels(d$arm)[pair], collapse = "-"), ages[1], ages[2])
  d$change <- Y[, ages[2]] - Y[, ages[1]]
  d$first <- relevel(d$arm, levels(d$arm)[pair[1]])
  of <- paste0("first", levels(d$arm)[pair[2]])
  everyone <- lm(change ~ first + z1 + z2, d)
  coefficient(paste0(name, "/occasions"), everyone, of)
  kept <- droplevels(d[d$arm %in% levels(d$arm)[pair], ])
  coefficient(paste0(name, "/own"), lm(change ~ first + z1 + z2, kept), of)
  # The stratum's mean square: mean over orthonormal changes of their residual mean squares.
  M <- qr.Q(qr(changes))
  E <- t(M) %*% SSD(lm(Y ~ arm + z1 + z2, d))$SSD %*% M
  df <- everyone$df.residual * 3
  se <- sqrt(sum(diag(E)) / df * 2 * summary(everyone)$cov.unscaled[of, of])
  put(paste0(name, "/pooled/estimate"), coef(everyone)[[of]], "stats::lm")
  put(paste0(name, "/pooled/se"), se, "stats::SSD of stats::lm, sum over orthonormal changes")
  put(paste0(name, "/pooled/df"), df, "stats::lm")
  # The mean of the two arms at the second of the occasions, in a model of these two arms alone.
  kept$y <- kept[[paste0("y", ages[2])]]
  contrasts(kept$first) <- contr.sum(2)
  kept$z1c <- kept$z1 - mean(kept$z1)
  kept$z2c <- kept$z2 - mean(kept$z2)
  coefficient(paste0(name, "/average"), lm(y ~ first + z1c + z2c, kept), "(Intercept)")
}

# Changes over all occasions in one arm alone.
for (arm in levels(d$arm)) {
  kept <- d$arm == arm
  centred <- scale(as.matrix(d[kept, c("z1", "z2")]), scale = FALSE)
  hypothesis(paste0("invented/occasion@", arm), Y[kept, ], cbind(1, centred), 1, changes)
}

# Two subjects of each arm: as many error df as changes, so that the trace of Hotelling and Lawley has no approximation.
few <- c(1, 2, 10, 11, 17, 18)
for (criterion in criteria[-3]) {
  one <- lm(Y[few, ] ~ arm, d[few, ])
  row <- as.data.frame(anova(one, lm(Y[few, ] ~ 1), T = t(changes), test = criterion))[2, ]
  put(paste0("few/", criterion, "/F"), row[["approx F"]], "stats::anova.mlm")
  put(paste0("few/", criterion, "/p"), row[["Pr(>F)"]], "stats::anova.mlm")
}

# Two sexes, ages 10, 12, 14, with the distance at 8 as covariate.
d <- read.csv("potthoff_roy_1964.csv")
d$sex <- factor(d$sex, levels = c("Male", "Female"))
Y <- as.matrix(d[, c("d10", "d12", "d14")])
X <- cbind(1, contr.sum(2)[d$sex, ], d$d8 - mean(d$d8))
hypothesis("potthoff_roy/sex:age", Y, X, 2, contr.helmert(3))
hypothesis("potthoff_roy/age", Y, X, 1, contr.helmert(3))
for (k in 1:3) coefficient(paste0("potthoff_roy/sex@", colnames(Y)[k]), lm(Y[, k] ~ sex + d8, d), "sexFemale")

cat('{\n "made_by": "methods.R,', R.version.string, '",\n "values": [\n', sep = "")
cat(found, sep = ",\n")
cat("\n ]\n}\n")
