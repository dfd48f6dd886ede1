# Variances of pairwise differences in sequences, participants and periods fixed: direct effects with
# and without first-order carryover in the model, and carryover effects. The model is written out in
# full, with one column for every effect, and solved with a Moore-Penrose inverse.
# Data set: OrchardSprays (R datasets), an 8 x 8 Latin square, row as participant and column as
# period; then with two participants who withdraw. Squares: Williams 1949 and the cyclic ones.
# Usage: Rscript design-efficiency.R > design-efficiency.json
suppressMessages({
  library(jsonlite); library(MASS)
})

indicator <- function(values, levels) outer(values, levels, function(a, b) as.numeric(!is.na(a) & a == b))

model <- function(sequences, conditions, carryover) {
  do.call(rbind, lapply(seq_along(sequences), function(i) {
    s <- sequences[[i]]
    columns <- cbind(indicator(rep(i, length(s)), seq_along(sequences)),
                     indicator(seq_along(s), seq_len(max(lengths(sequences)))),
                     indicator(s, seq_len(conditions)))
    if (carryover) cbind(columns, indicator(c(NA, head(s, -1)), seq_len(conditions))) else columns
  }))
}

variances <- function(x, offset, conditions) {
  inverse <- ginv(crossprod(x))
  pairs <- combn(conditions, 2)
  apply(pairs, 2, function(pair) {
    w <- numeric(ncol(x)); w[offset + pair] <- c(1, -1)
    stopifnot(max(abs(crossprod(x) %*% inverse %*% w - w)) < 1e-8)
    drop(w %*% inverse %*% w)
  })
}

case <- function(name, sequences, conditions) {
  before <- length(sequences) + max(lengths(sequences))
  full <- model(sequences, conditions, TRUE)
  list(name = name, conditionCount = conditions,
       sequences = lapply(sequences, function(s) I(s - 1)),
       direct = variances(model(sequences, conditions, FALSE), before, conditions),
       directAdjusted = variances(full, before, conditions),
       carryover = variances(full, before + conditions, conditions))
}

rows <- function(square) lapply(seq_len(nrow(square)), function(i) square[i, ])
cyclic <- function(first) t(sapply(seq_along(first) - 1, function(r) (first - 1 + r) %% length(first) + 1))
williams <- function(n) {
  first <- c(1, as.vector(rbind(2:n, n:2)))[1:n]
  square <- cyclic(first)
  if (n %% 2 == 0) square else rbind(square, square[, n:1])
}

orchard <- with(OrchardSprays, tapply(as.integer(treatment), list(rowpos, colpos), identity))
orchard <- rows(matrix(as.integer(orchard), 8))
withdrawn <- orchard
withdrawn[[2]] <- head(withdrawn[[2]], 5)
withdrawn[[5]] <- head(withdrawn[[5]], 3)

write(toJSON(list(
  generator = "design-efficiency.R",
  versions = list(R = R.version.string, MASS = as.character(packageVersion("MASS"))),
  cases = c(
    list(case("OrchardSprays (R datasets)", orchard, 8),
         case("OrchardSprays, two participants withdrawn", withdrawn, 8)),
    lapply(3:8, function(n) case(paste("Williams,", n, "conditions"), rows(williams(n)), n)),
    lapply(3:6, function(n) case(paste("cyclic,", n, "conditions"), rows(cyclic(seq_len(n))), n)))),
  auto_unbox = TRUE, digits = NA), stdout())
