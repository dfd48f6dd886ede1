# Rank tests: Friedman, signed-rank.
# Data: the rounding-first-base times of ?friedman.test (Hollander & Wolfe 1973, p. 140 ff.), which
# have ties; ergoStool (nlme, ties); the depression scores of ?wilcox.test (Hollander & Wolfe 1973,
# p. 29 f.); sleep (R datasets, with a zero difference and ties).
# References: friedman.test; wilcox.test (exact without ties, and the normal approximation); for ties
# the exact p-value by listing all 2^n signs, here; psignrank beyond a hundred pairs. Usage: Rscript ranks.R > ranks.json
suppressMessages({
  library(jsonlite); library(nlme)
})

RoundingTimes <- matrix(c(5.40, 5.50, 5.55, 5.85, 5.70, 5.75, 5.20, 5.60, 5.50, 5.55, 5.50, 5.40,
  5.90, 5.85, 5.70, 5.45, 5.55, 5.60, 5.40, 5.40, 5.35, 5.45, 5.50, 5.35, 5.25, 5.15, 5.00, 5.85,
  5.80, 5.70, 5.25, 5.20, 5.10, 5.65, 5.55, 5.45, 5.60, 5.35, 5.45, 5.05, 5.00, 4.95, 5.50, 5.50,
  5.40, 5.45, 5.55, 5.50, 5.55, 5.55, 5.35, 5.45, 5.50, 5.55, 5.50, 5.45, 5.25, 5.65, 5.60, 5.40,
  5.70, 5.65, 5.55, 6.30, 6.30, 6.25), nrow = 22, byrow = TRUE)
stool <- as.data.frame(ergoStool)
ergo <- t(sapply(as.character(1:9), function(s) {
  own <- stool[as.character(stool$Subject) == s, ]
  own$effort[order(own$Type)]
}))
untied <- matrix(c(3.1, 4.2, 5.9, 2.2, 2.8, 3.3, 5.1, 1.9, 4.4, 3.6, 6.0, 2.7, 3.9, 4.8, 4.1, 3.2,
                   2.5, 5.2, 5.6, 1.1), nrow = 5, byrow = TRUE)
friedman <- function(name, table) {
  r <- friedman.test(table)
  ranks <- t(apply(table, 1, rank))
  list(name = name, table = unname(table), chiSquare = r$statistic[[1]],
       degreesOfFreedom = r$parameter[[1]], pValue = r$p.value, rankSums = colSums(ranks))
}
allSigns <- function(d) {
  d <- d[d != 0]
  r <- rank(abs(d))
  signs <- as.matrix(expand.grid(rep(list(0:1), length(d))))
  w <- signs %*% r
  observed <- sum(r[d > 0])
  min(1, 2 * min(mean(w <= observed), mean(w >= observed)))
}
signed <- function(name, d) {
  kept <- d[d != 0]
  entry <- list(name = name, differences = d, statistic = sum(rank(abs(kept))[kept > 0]))
  approximate <- suppressWarnings(wilcox.test(kept, exact = FALSE, correct = TRUE))
  entry$approximatePValue <- approximate$p.value
  if (length(kept) <= 16) entry$allSignsPValue <- allSigns(d)
  if (length(kept) < 50 && !anyDuplicated(abs(kept)) && length(kept) == length(d)) {
    exact <- wilcox.test(d, exact = TRUE, conf.int = TRUE, conf.level = 0.95)
    entry$exactPValue <- exact$p.value
    entry$hodgesLehmann <- exact$estimate[[1]]
    entry$lower <- exact$conf.int[1]
    entry$upper <- exact$conf.int[2]
    entry$achievedLevel <- attr(exact$conf.int, "conf.level")
  }
  walsh <- sort(outer(d, d, "+")[lower.tri(diag(length(d)), diag = TRUE)] / 2)
  entry$medianWalsh <- median(walsh)
  if (length(d) > 100 && !anyDuplicated(abs(kept))) {
    total <- length(d) * (length(d) + 1) / 2
    smaller <- min(entry$statistic, total - entry$statistic)
    entry$exactPValue <- 2 * psignrank(smaller, length(d))
    depth <- qsignrank(0.025, length(d))
    entry$lowerAround <- walsh[depth + -2:2]
    entry$upperAround <- walsh[length(walsh) + 1 - depth + -2:2]
  }
  entry
}
depression1 <- c(1.83, 0.50, 1.62, 2.48, 1.68, 1.88, 1.55, 3.06, 1.30)
depression2 <- c(0.878, 0.647, 0.598, 2.05, 1.06, 1.29, 1.06, 3.14, 1.29)
set.seed(7, kind = "Mersenne-Twister")
many <- round(rnorm(140, 0.2, 1), 2)
thirty <- rnorm(30, 0.3, 1)
hundred <- rnorm(120, 0.15, 1)
write(toJSON(list(
  generator = "ranks.R",
  versions = list(R = R.version.string, nlme = as.character(packageVersion("nlme"))),
  friedman = list(friedman("rounding first base, ?friedman.test", RoundingTimes),
                  friedman("ergoStool (nlme)", unname(ergo)),
                  friedman("five participants without ties", untied)),
  signedRank = list(
    signed("depression, ?wilcox.test", depression1 - depression2),
    signed("sleep (R datasets)", round(sleep$extra[11:20] - sleep$extra[1:10], 1)),
    signed("ergoStool (nlme), first two types", unname(ergo[, 1] - ergo[, 2])),
    signed("thirty seeded normal draws", thirty),
    signed("120 seeded normal draws", hundred),
    signed("140 seeded normal draws, rounded so that they tie", many))),
  auto_unbox = TRUE, digits = NA, pretty = TRUE), stdout())
