# Repeated-measures ANOVA with sphericity tests and corrections.
# Data sets: ergoStool (nlme) and OBrienKaiser (carData), whole and in part.
# References: car::Anova type III on the multivariate fit (sums of squares, F, Mauchly, epsilons),
# afex::aov_car for generalised eta squared. Huynh-Feldt: car, as mauchly.test's companions in R, uses
# ((nu + 1) d e - 2) / (d (nu - d e)), which is Lecoutre's (1991) form; the script recomputes both
# epsilons from the covariance of orthonormal contrasts and stops if they differ.
# Mauchly's p: stats::mauchly.test on the contrast scores themselves. Asked about contrasts of the
# cells instead, R 4.2.2 (and car) puts the number of cells for the number of contrasts in one term,
# 3p, of the second-order correction, which moves p in its third digit; Anderson's formula has the
# number of contrasts throughout.
# Usage: Rscript repeated-measures-anova.R > repeated-measures-anova.json
suppressMessages({
  library(car); library(afex); library(nlme); library(jsonlite)
})
options(contrasts = c("contr.sum", "contr.poly"))

# wide: participants x cells; within: data frame of factors by cell; between: data frame or NULL
analyse <- function(wide, within, between, name, measured = NULL) {
  data <- as.data.frame(between)
  fit <- if (is.null(between)) lm(wide ~ 1) else
    eval(bquote(lm(as.formula(paste("wide ~", .(paste(names(between), collapse = "*")))), data = data)))
  formula <- as.formula(paste("~", paste(names(within), collapse = "*")))
  result <- Anova(fit, idata = within, idesign = formula, type = 3)
  sums <- summary(result, multivariate = FALSE)
  table <- unclass(sums$univariate.tests)
  corrections <- unclass(sums$pval.adjustments)
  spheric <- unclass(sums$sphericity.tests)
  nu <- fit$df.residual
  effects <- lapply(setdiff(rownames(table), "(Intercept)"), function(term) {
    row <- table[term, ]
    entry <- list(
      factors = I(parts <- strsplit(term, ":")[[1]]),
      sumOfSquares = row[["Sum Sq"]], degreesOfFreedom = row[["num Df"]],
      errorSumOfSquares = row[["Error SS"]], errorDegreesOfFreedom = row[["den Df"]],
      fStatistic = row[["F value"]], pValue = row[["Pr(>F)"]]
    )
    if (term %in% rownames(corrections)) {
      parts <- intersect(parts, names(within))
      contrasts <- orthonormal(within, parts)
      S <- crossprod(residuals(fit) %*% contrasts) / nu
      d <- ncol(S)
      gg <- sum(diag(S))^2 / (d * sum(S^2))
      hf <- ((nu + 1) * d * gg - 2) / (d * (nu - d * gg))
      stopifnot(abs(gg - corrections[term, "GG eps"]) < 1e-9,
                abs(hf - corrections[term, "HF eps"]) < 1e-9)
      entry$ggEpsilon <- gg
      entry$hfEpsilon <- hf
      entry$ggPValue <- pf(entry$fStatistic, gg * entry$degreesOfFreedom,
                           gg * entry$errorDegreesOfFreedom, lower.tail = FALSE)
      cap <- min(1, hf)
      entry$hfPValue <- pf(entry$fStatistic, cap * entry$degreesOfFreedom,
                           cap * entry$errorDegreesOfFreedom, lower.tail = FALSE)
      stopifnot(abs(entry$ggPValue - corrections[term, "Pr(>F[GG])"]) < 1e-9,
                abs(entry$hfPValue - corrections[term, "Pr(>F[HF])"]) < 1e-9)
      # The contrast scores' own model, so that mauchly.test is asked about all its responses.
      scores <- wide %*% contrasts
      right <- if (is.null(between)) "1" else paste(names(between), collapse = "*")
      formula <- as.formula(paste("scores ~", right))
      own <- mauchly.test(if (is.null(between)) lm(formula) else lm(formula, data = data))
      stopifnot(abs(own$statistic - spheric[term, "Test statistic"]) < 1e-9)
      entry$mauchlyW <- own$statistic[[1]]
      entry$mauchlyP <- own$p.value
    }
    entry
  })
  long <- data.frame(
    participant = factor(rep(seq_len(nrow(wide)), ncol(wide))),
    response = as.vector(wide),
    within[rep(seq_len(ncol(wide)), each = nrow(wide)), , drop = FALSE]
  )
  for (factor in names(between)) long[[factor]] <- rep(between[[factor]], ncol(wide))
  ges <- function(observed) {
    left <- if (is.null(between)) "1" else paste(names(between), collapse = "*")
    call <- as.formula(paste("response ~", left, "+ Error(participant/(",
                             paste(names(within), collapse = "*"), "))"))
    model <- suppressMessages(aov_car(call, data = long, observed = observed, factorize = FALSE))
    table <- anova(model, es = c("ges", "pes"), observed = observed)
    list(ges = setNames(as.list(table$ges), rownames(table)),
         pes = setNames(as.list(table$pes), rownames(table)))
  }
  list(
    name = name,
    withinFactors = lapply(names(within), function(f) list(key = f, levelKeys = levels(within[[f]]))),
    betweenFactors = lapply(names(between), function(f)
      list(key = f, levelKeys = levels(between[[f]]))),
    participants = lapply(seq_len(nrow(wide)), function(i) list(
      key = paste0("p", i),
      betweenLevelKeys = I(vapply(names(between), function(f) as.character(between[i, f]), "",
                                  USE.NAMES = FALSE)),
      values = I(unname(wide[i, ])))),
    effects = effects,
    etaSquared = ges(NULL),
    measuredBetweenFactors = I(as.character(measured)),
    etaSquaredMeasured = if (is.null(measured)) NULL else ges(measured)
  )
}

# Orthonormal contrasts of a within effect, cells by degrees of freedom, by QR of helmert codes.
orthonormal <- function(within, parts) {
  columns <- matrix(1, nrow(within), 1)
  for (factor in names(within)) {
    k <- nlevels(within[[factor]])
    code <- if (factor %in% parts) contr.helmert(k) else matrix(1, k, 1)
    code <- sweep(code, 2, sqrt(colSums(code^2)), "/")[as.integer(within[[factor]]), , drop = FALSE]
    columns <- do.call(cbind, lapply(seq_len(ncol(columns)), function(j) columns[, j] * code))
  }
  columns
}

stool <- as.data.frame(ergoStool)
ergo <- t(sapply(as.character(1:9), function(s) {
  own <- stool[as.character(stool$Subject) == s, ]
  own$effort[order(own$Type)]
}))
ergoWithin <- data.frame(type = factor(c("t1", "t2", "t3", "t4")))

obk <- carData::OBrienKaiser
obkWithin <- data.frame(
  phase = factor(rep(c("pre", "post", "fup"), each = 5), levels = c("pre", "post", "fup")),
  hour = factor(rep(1:5, 3)))
obkBetween <- data.frame(treatment = obk$treatment, gender = obk$gender)
obkWide <- as.matrix(obk[, 3:17])
dimnames(obkWide) <- NULL

cases <- list(
  analyse(unname(ergo), ergoWithin, NULL, "ergoStool (nlme)"),
  analyse(obkWide, obkWithin, obkBetween, "OBrienKaiser (carData)", measured = "gender"),
  analyse(obkWide[, 1:5], data.frame(hour = factor(1:5)), obkBetween["treatment"],
          "OBrienKaiser (carData), pre phase, by treatment"),
  analyse(obkWide, obkWithin, NULL, "OBrienKaiser (carData), groups ignored")
)
write(toJSON(list(
  generator = "repeated-measures-anova.R",
  versions = list(R = R.version.string, car = as.character(packageVersion("car")),
                  afex = as.character(packageVersion("afex")),
                  nlme = as.character(packageVersion("nlme")),
                  carData = as.character(packageVersion("carData"))),
  cases = cases), auto_unbox = TRUE, digits = NA, pretty = TRUE, null = "null"), stdout())
