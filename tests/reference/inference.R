# Multiplicity, paired comparisons, equivalence, within-participant intervals.
# Data: sleep (R datasets), ergoStool (nlme), the p-values of a seeded draw.
# References: p.adjust; t.test paired, and one-sided with shifted mu for the two one-sided tests
# (Schuirmann 1987); the factor of Hedges 1981 by lgamma; the intervals of Cousineau and Morey 2008,
# the d_av variance of Bonett 2008, the d_z variance of Gibbons et al. 1993, written out in base R.
# Usage: Rscript inference.R > inference.json
suppressMessages({
  library(jsonlite); library(nlme)
})
p <- c(0.011, 0.02, 0.64, 0.0004, 0.02, 0.049, 0.3, 1, 0.00017)
one <- sleep$extra[1:10]
two <- sleep$extra[11:20]
t <- t.test(one, two, paired = TRUE)
d <- one - two
n <- length(d)
average <- (var(one) + var(two)) / 2
dav <- mean(d) / sqrt(average)
bonett <- dav^2 * (var(one)^2 + var(two)^2 + 2 * cov(one, two)^2) / (8 * average^2 * (n - 1)) +
  (var(one) + var(two) - 2 * cov(one, two)) / (average * (n - 1))
dz <- mean(d) / sd(d)
stool <- as.data.frame(ergoStool)
ergo <- t(sapply(as.character(1:9), function(s) {
  own <- stool[as.character(stool$Subject) == s, ]
  own$effort[order(own$Type)]
}))
k <- ncol(ergo)
normalised <- ergo - rowMeans(ergo) + mean(ergo)
error <- sqrt(apply(normalised, 2, var) * k / (k - 1) / nrow(ergo))
half <- qt(0.975, nrow(ergo) - 1) * error
lower <- t.test(one, two, paired = TRUE, mu = -3, alternative = "greater")
upper <- t.test(one, two, paired = TRUE, mu = 1, alternative = "less")
ninety <- t.test(one, two, paired = TRUE, conf.level = 0.9)$conf.int
logs <- t.test(log(ergo[, 1]), log(ergo[, 2]), paired = TRUE, conf.level = 0.9)
logLower <- t.test(log(ergo[, 1]), log(ergo[, 2]), paired = TRUE, mu = log(0.8),
                   alternative = "greater")
logUpper <- t.test(log(ergo[, 1]), log(ergo[, 2]), paired = TRUE, mu = log(1.25),
                   alternative = "less")
write(toJSON(list(
  generator = "inference.R",
  versions = list(R = R.version.string, nlme = as.character(packageVersion("nlme"))),
  multiplicity = list(p = p, holm = p.adjust(p, "holm"), bonferroni = p.adjust(p, "bonferroni")),
  paired = list(
    first = one, second = two, meanDifference = mean(d), standardDeviation = sd(d),
    standardError = t$stderr, lower = t$conf.int[1], upper = t$conf.int[2],
    tStatistic = t$statistic[[1]], degreesOfFreedom = t$parameter[[1]], pValue = t$p.value,
    dz = dz, dzHalf = qnorm(0.975) * sqrt(1 / n + dz^2 / (2 * n)), dav = dav,
    davHalf = qnorm(0.975) * sqrt(bonett),
    hedges = exp(lgamma((n - 1) / 2) - lgamma((n - 2) / 2)) / sqrt((n - 1) / 2)),
  equivalence = list(
    lowerMargin = -3, upperMargin = 1, alpha = 0.05,
    lowerT = lower$statistic[[1]], lowerP = lower$p.value,
    upperT = upper$statistic[[1]], upperP = upper$p.value,
    intervalLower = ninety[1], intervalUpper = ninety[2]),
  ratio = list(
    first = ergo[, 1], second = ergo[, 2], estimate = logs$estimate[[1]], standardError = logs$stderr,
    degreesOfFreedom = logs$parameter[[1]], lowerMargin = 0.8, upperMargin = 1.25, alpha = 0.05,
    lowerP = logLower$p.value, upperP = logUpper$p.value,
    intervalLower = exp(logs$conf.int[1]), intervalUpper = exp(logs$conf.int[2]),
    geometricMeanFirst = exp(mean(log(ergo[, 1])))),
  within = list(table = unname(ergo), mean = unname(colMeans(ergo)), standardError = unname(error),
                half = unname(half))),
  auto_unbox = TRUE, digits = NA, pretty = TRUE), stdout())
