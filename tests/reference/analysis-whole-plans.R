# Whole analyses on open data sets, for the tests of server/core/analysis: the data as long tables,
# and what R makes of them. ergoStool and OBrienKaiser have no order of presentation; the periods
# given here are a fixed assignment, the same for R and for Fairturn.
#
# Usage: Rscript analysis-whole-plans.R > analysis-whole-plans.json
suppressPackageStartupMessages({
  library(afex); library(car); library(emmeans); library(nlme); library(jsonlite)
})
options(contrasts = c("contr.sum", "contr.poly"))
afex_options(correction_aov = "GG")
emm_options(msg.interaction = FALSE)

paired <- function(a, b, margins = NULL) {
  both <- !is.na(a) & !is.na(b); a <- a[both]; b <- b[both]
  t <- t.test(a, b, paired = TRUE)
  out <- list(estimate = unname(t$estimate), lower = t$conf.int[1], upper = t$conf.int[2],
              t = unname(t$statistic), df = unname(t$parameter), p = t$p.value, pairs = length(a),
              dz = mean(a - b) / sd(a - b))
  if (!is.null(margins)) {
    out$pAboveLower <- t.test(a, b, paired = TRUE, mu = margins[1], alternative = "greater")$p.value
    out$pBelowUpper <- t.test(a, b, paired = TRUE, mu = margins[2], alternative = "less")$p.value
  }
  out
}

pairsOf <- function(wide, margins = NULL) {
  keys <- combn(colnames(wide), 2, simplify = FALSE)
  all <- lapply(keys, function(k)
    c(list(first = k[1], second = k[2]), paired(wide[, k[1]], wide[, k[2]], margins)))
  holm <- p.adjust(sapply(all, `[[`, "p"), "holm")
  Map(function(x, p) c(x, list(holm = p)), all, holm)
}

sphericity <- function(data) {
  a <- aov_ez("participant", "y", data, within = "condition")
  s <- summary(a)
  list(f = unname(s$univariate.tests["condition", "F value"]),
       df = unname(s$univariate.tests["condition", "num Df"]),
       errorDf = unname(s$univariate.tests["condition", "den Df"]),
       p = unname(s$univariate.tests["condition", "Pr(>F)"]),
       ges = anova(a)["condition", "ges"],
       mauchly = unname(s$sphericity.tests[1, "Test statistic"]),

       gg = unname(s$pval.adjustments[1, "GG eps"]), ggP = unname(s$pval.adjustments[1, "Pr(>F[GG])"]),
       hf = unname(s$pval.adjustments[1, "HF eps"]), hfP = unname(s$pval.adjustments[1, "Pr(>F[HF])"]))
}

orderFit <- function(data) {
  data$period <- factor(data$period)
  fit <- lm(y ~ participant + condition + period, data)
  tests <- drop1(fit, test = "F")
  means <- function(f) {
    s <- as.data.frame(confint(emmeans(fit, f)))
    list(level = as.character(s[[1]]), mean = s$emmean, se = s$SE, lower = s$lower.CL, upper = s$upper.CL)
  }
  differences <- as.data.frame(summary(pairs(emmeans(fit, "condition"), adjust = "none"),
                                       infer = c(TRUE, TRUE)))
  effect <- as.data.frame(confint(eff_size(emmeans(fit, "condition"), sigma = sqrt(2) * sigma(fit),
                                           edf = df.residual(fit))))
  k <- nlevels(data$period); scores <- seq_len(k) - mean(seq_len(k))
  trend <- as.data.frame(summary(contrast(emmeans(fit, "period"),
    list(linear = scores / sum(scores^2))), infer = c(TRUE, TRUE)))
  list(sigma = sigma(fit), df = df.residual(fit), n = nrow(data),
       conditionF = tests["condition", "F value"], conditionP = tests["condition", "Pr(>F)"],
       periodF = tests["period", "F value"], periodP = tests["period", "Pr(>F)"],
       conditions = means("condition"), periods = means("period"),
       differences = list(contrast = differences$contrast, estimate = differences$estimate,
         se = differences$SE, lower = differences$lower.CL, upper = differences$upper.CL,
         d = effect$effect.size, dLower = effect$lower.CL, dUpper = effect$upper.CL,
         p = differences$p.value, holm = p.adjust(differences$p.value, "holm")),
       trend = list(estimate = trend$estimate, se = trend$SE, p = trend$p.value))
}

# Cousineau's normalisation with Morey's correction, written out.
morey <- function(wide) {
  n <- nrow(wide); k <- ncol(wide)
  z <- wide - rowMeans(wide) + mean(wide)
  se <- sqrt(apply(z, 2, var) * k / (k - 1) / n)
  half <- qt(.975, n - 1) * se
  list(condition = colnames(wide), mean = unname(colMeans(wide)),
       lower = unname(colMeans(wide) - half), upper = unname(colMeans(wide) + half))
}

describe <- function(y) {
  list(n = length(y), mean = mean(y), sd = sd(y), quantiles = unname(quantile(y, type = 7)),
       geometricMean = exp(mean(log(y))))
}

wideOf <- function(data) {
  w <- with(data, tapply(y, list(participant, condition), mean)); w
}

analyse <- function(data, margins = NULL) {
  wide <- wideOf(data)
  complete <- rownames(wide)[rowSums(is.na(wide)) == 0]
  kept <- droplevels(data[data$participant %in% complete, ])
  list(complete = length(complete), anova = sphericity(kept), order = orderFit(data),
       pairs = pairsOf(wide, margins), morey = morey(wide[complete, ]),
       friedman = unclass(friedman.test(wide[complete, ]))[c("statistic", "parameter", "p.value")])
}

ergo <- as.data.frame(ergoStool)
ergo <- data.frame(participant = factor(paste0("s", as.character(ergo$Subject)), levels = paste0("s", 1:9)),
                   condition = factor(tolower(as.character(ergo$Type))), y = ergo$effort)
ergo <- ergo[order(ergo$participant, ergo$condition), ]
s <- as.integer(ergo$participant); k <- as.integer(ergo$condition)
ergo$period <- (k - s) %% 4 + 1
logged <- transform(ergo, y = log(y))
# Two values taken away: s3 has no t2, s7 no t4.
gaps <- ergo[!(ergo$participant == "s3" & ergo$condition == "t2") &
             !(ergo$participant == "s7" & ergo$condition == "t4"), ]

data(OBrienKaiser, package = "carData")
ob <- OBrienKaiser; ob$id <- factor(1:16)
names <- expand.grid(hour = 1:5, phase = c("pre", "post", "fup"))
long <- do.call(rbind, lapply(seq_len(nrow(names)), function(i) {
  column <- paste0(names$phase[i], ".", names$hour[i])
  data.frame(id = ob$id, treatment = ob$treatment, gender = ob$gender, phase = names$phase[i],
             hour = paste0("h", names$hour[i]), y = ob[[column]])
}))
factorial <- aov_ez("id", "y", long, between = c("treatment", "gender"), within = c("phase", "hour"))
fs <- summary(factorial)
u <- fs$univariate.tests[-1, ]
adjusted <- fs$pval.adjustments

out <- list(
  about = list(R = R.version.string, afex = as.character(packageVersion("afex")),
    car = as.character(packageVersion("car")), emmeans = as.character(packageVersion("emmeans")),
    nlme = as.character(packageVersion("nlme")),
    data = "ergoStool of nlme; OBrienKaiser of carData"),
  ergoStool = list(
    rows = ergo, analysis = analyse(ergo, c(-2, 2)), logarithm = analyse(logged, log(c(.8, 1.25))),
    gaps = analyse(gaps),
    descriptives = lapply(split(ergo$y, ergo$condition), describe)),
  obrienKaiser = list(
    rows = transform(long, id = as.character(id), treatment = tolower(treatment),
                     gender = tolower(gender), phase = as.character(phase)),
    effects = lapply(rownames(u), function(r) list(effect = r, df = u[r, "num Df"],
      errorDf = u[r, "den Df"], f = u[r, "F value"], p = u[r, "Pr(>F)"],
      gg = if (r %in% rownames(adjusted)) adjusted[r, "GG eps"] else NULL,
      ges = anova(factorial)[r, "ges"]))),
  quantiles = list(values = c(2.5, 9, -4, 7.25, 1e3, 3, 3, 0.125),
    probabilities = seq(0, 1, .05),
    type7 = unname(quantile(c(2.5, 9, -4, 7.25, 1e3, 3, 3, 0.125), seq(0, 1, .05), type = 7))))
cat(toJSON(out, digits = NA, auto_unbox = TRUE, pretty = 1), "\n")
