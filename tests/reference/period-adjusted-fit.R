# Condition and period effects within participants by least squares.
# Data set: OrchardSprays (R datasets), an 8 x 8 Latin square: row as participant, column as period,
# treatment as condition; then with rows taken out (unbalanced), with a whole condition out of some
# rows, and with repeated trials of unequal number made by jittering (seeded; shape only).
# References: lm, drop1 (type III for main effects), emmeans for means, pairs and the linear trend.
# Usage: Rscript period-adjusted-fit.R > period-adjusted-fit.json
suppressMessages({
  library(emmeans); library(jsonlite)
})
emm_options(msg.interaction = FALSE, rg.limit = 1e6)

square <- transform(OrchardSprays, participant = factor(rowpos), period = factor(colpos),
                    condition = factor(treatment), response = decrease)
square <- square[c("participant", "period", "condition", "response")]
holes <- square[-c(3, 9, 10, 27, 28, 29, 44, 61, 62), ]
fewer <- droplevels(square[!(square$condition %in% c("A", "B") & as.integer(square$participant) > 5), ])
set.seed(20, kind = "Mersenne-Twister")
trials <- square[rep(seq_len(nrow(square)), times = 1 + (seq_len(nrow(square)) * 7) %% 4), ]
trials$response <- round(trials$response + rnorm(nrow(trials), 0, 5), 2)

estimates <- function(grid) {
  s <- as.data.frame(summary(grid, infer = TRUE))
  value <- intersect(c("emmean", "estimate"), names(s))
  lapply(seq_len(nrow(s)), function(i) list(
    label = as.character(s[i, 1]), estimate = s[i, value], standardError = s$SE[i],
    degreesOfFreedom = s$df[i], lower = s$lower.CL[i], upper = s$upper.CL[i],
    tStatistic = s$t.ratio[i], pValue = s$p.value[i]))
}
test <- function(model, term) {
  row <- drop1(model, test = "F")[term, ]
  list(sumOfSquares = row[["Sum of Sq"]], degreesOfFreedom = row[["Df"]],
       fStatistic = row[["F value"]], pValue = row[["Pr(>F)"]])
}
fit <- function(data, withPeriod) {
  model <- if (withPeriod) lm(response ~ participant + period + condition, data) else
    lm(response ~ participant + condition, data)
  conditions <- emmeans(model, "condition")
  out <- list(residualSumOfSquares = sum(residuals(model)^2),
              residualDegreesOfFreedom = model$df.residual,
              conditionTest = test(model, "condition"),
              conditionMeans = estimates(conditions),
              differences = estimates(pairs(conditions, adjust = "none")))
  if (withPeriod) {
    periods <- emmeans(model, "period")
    j <- as.numeric(levels(data$period))
    weights <- (j - mean(j)) / sum((j - mean(j))^2)
    out$periodTest <- test(model, "period")
    out$periodMeans <- estimates(periods)
    out$linearTrend <- estimates(contrast(periods, list(linear = weights)))[[1]]
  }
  out
}
case <- function(name, data) list(
  name = name,
  participantIndex = as.integer(data$participant) - 1L,
  conditionIndex = as.integer(data$condition) - 1L,
  periodIndex = as.integer(data$period) - 1L,
  response = data$response,
  participantCount = nlevels(data$participant), conditionCount = nlevels(data$condition),
  periodCount = nlevels(data$period),
  adjusted = fit(data, TRUE), unadjusted = fit(data, FALSE))

write(toJSON(list(
  generator = "period-adjusted-fit.R",
  versions = list(R = R.version.string, emmeans = as.character(packageVersion("emmeans"))),
  cases = list(case("OrchardSprays (R datasets), complete Latin square", square),
               case("OrchardSprays, nine observations missing", holes),
               case("OrchardSprays, two conditions missing for three participants", fewer),
               case("OrchardSprays with one to four trials per cell", trials))),
  auto_unbox = TRUE, digits = NA, pretty = TRUE), stdout())
