# Posteriors of a small model, worked out by R (base only): two cord segments or nothing wrong,
# three findings on the left pelvic limb. Written from the specification of the model, apart from
# the Go code. Run:  Rscript small_model.R > small_model.csv
#
# Hypotheses: no lesion; segment T12; segment L5 (both halves alike, severity 0.65, grey and white
# alike, later than a week, median plexus), with prior 0.2, 0.5, 0.3.
# Findings: voluntary-motor (0-4), patellar (0-4), withdrawal (0-2), each graded.

segments <- c(paste0("C", 1:8), paste0("T", 1:13), paste0("L", 1:7), paste0("S", 1:3), paste0("Cd", 1:5))
arc <- function(...) { w <- c(...); out <- setNames(numeric(length(segments)), segments); out[names(w)] <- w; out / sum(w) }
main <- 1; also <- 0.6; now_and_then <- 0.2

arcs <- list(
  quadriceps = arc(L4 = also, L5 = main, L6 = also),
  hip        = arc(L4 = also, L5 = main, L6 = also),
  hamstring  = arc(L6 = also, L7 = main, S1 = also, S2 = now_and_then),
  gluteal    = arc(L6 = also, L7 = main, S1 = also, S2 = now_and_then),
  tibialis   = arc(L5 = 0.07, L6 = 0.89, L7 = 0.36),           # counted
  gastroc    = arc(L5 = 0.14, L6 = 0.54, L7 = 1, S1 = 0.79),   # counted
  plantar    = arc(L6 = now_and_then, L7 = main, S1 = main, S2 = now_and_then),
  fibular    = arc(L6 = main, L7 = main, S1 = now_and_then),   # skin
  sciatic    = arc(L6 = also, L7 = main, S1 = also, S2 = now_and_then))

severity <- 0.65
reflex_up <- 0.5; pseudo <- 0.5
slip <- 0.03; spread <- 1; blunder <- 0.005
thresholds <- list(
  motor      = list(slope = 14, down = c(0.17, 0.38, 0.55, 0.77), up = c()),
  patellar   = list(slope = 9,  down = c(0.33, 0.6), up = c(0.55, 0.9)),
  withdrawal = list(slope = 12, down = c(0.32, 0.65), up = c()))

both <- function(a, b) 1 - (1 - a) * (1 - b)

# Loss of each arc and of control from above, for a lesion of one segment.
state <- function(where) {
  damage <- setNames(numeric(length(segments)), segments)
  if (!is.na(where)) damage[where] <- severity
  lost <- sapply(arcs, function(w) sum(w * damage))
  above <- sapply(arcs, function(w) {
    if (is.na(where)) return(0)
    severity * sum(w[seq_along(w) > match(where, segments)])
  })
  list(lost = lost, above = above)
}

values <- function(where) {
  s <- state(where); L <- s$lost; U <- s$above
  weights <- c(quadriceps = 0.4, hip = 0.1, hamstring = 0.15, gluteal = 0.1, tibialis = 0.1, gastroc = 0.15)
  lower <- sum(weights * L[names(weights)])
  upper <- sum(weights * U[names(weights)])
  sciatic <- 0.5 * (L["hamstring"] + L["tibialis"])
  brisk <- both(reflex_up * U["quadriceps"], pseudo * sciatic)
  knee <- min(1, 1.35 * L["quadriceps"])
  flexion <- 0.55 * (0.25 * L["hip"] + 0.2 * L["hamstring"] + 0.35 * L["tibialis"] + 0.2 * L["plantar"]) +
    0.45 * max(L["hip"], L["hamstring"], L["tibialis"], L["plantar"])
  c(motor = unname(both(upper, lower)),
    patellar = unname(knee - brisk * (1 - knee)),
    withdrawal = unname(both(flexion, 0.3 * L["fibular"])))
}

# The chance of each grade, best grade last, at a shared deviation u (logits, ill is positive).
grades <- function(item, v, u) {
  t <- thresholds[[item]]
  below <- plogis(t$slope * (v - t$down) + u)
  above <- if (length(t$up)) plogis(t$slope * (-v - t$up) - u) else numeric(0)
  p <- c(rev(below) - c(0, rev(below)[-length(below)]),
         1 - below[1] - (if (length(above)) above[1] else 0),
         if (length(above)) above - c(above[-1], 0) else numeric(0))
  miss <- c(0, slip, 0.3 * slip, 0.08 * slip, 0.03 * slip)
  n <- length(p)
  sapply(seq_len(n), function(g) p[g] + sum(sapply(seq_len(n), function(k) miss[abs(k - g) + 1] * (p[k] - p[g]))))
}

deviation <- c(-14, -spread * sqrt(3), 0, spread * sqrt(3), 14)
rest <- 1 - 1.5 * blunder
weight <- c(0.5 * blunder, rest / 6, rest * 2 / 3, rest / 6, blunder)

# The three findings are of three different arcs: each has its own deviation.
chance <- function(item, v, grade) sum(weight * sapply(deviation, function(u) grades(item, v, u)[grade + 1]))

places <- c(NA, "T12", "L5"); prior <- c(0.2, 0.5, 0.3)
v <- lapply(places, values)
cat("motor,patellar,withdrawal,none,T12,L5\n")
for (m in 0:4) for (p in 0:4) for (w in 0:2) {
  like <- sapply(v, function(x) chance("motor", x["motor"], m) * chance("patellar", x["patellar"], p) * chance("withdrawal", x["withdrawal"], w))
  post <- prior * like / sum(prior * like)
  cat(sprintf("%d,%d,%d,%.12f,%.12f,%.12f\n", m, p, w, post[1], post[2], post[3]))
}
