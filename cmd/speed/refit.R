# The work of one resample in R: straight line and power-prefactor by lm.fit,
# parallel by minpack.lm's nls.lm with an analytic Jacobian from the estimate of the
# original data, choice by AICc. Arguments: temperatures, resamples (one a row) and
# start (a1, E1, a2, E2, T_ref), each a CSV without heading. Prints microseconds a
# resample and the sum of the smallest RSS, by which the programs are seen to agree.
suppressMessages(library(minpack.lm))
arg <- commandArgs(trailingOnly = TRUE)
t <- scan(arg[1], quiet = TRUE)
y <- as.matrix(read.csv(arg[2], header = FALSE))
s <- scan(arg[3], sep = ",", quiet = TRUE)
R <- 8.31446261815324
x <- (1 / t - 1 / s[5]) / R
n <- length(t)
line <- cbind(1, x)
power <- cbind(line, log(t / s[5]))
par2 <- function(p, y) {
  l1 <- p[1] - p[2] * x; l2 <- p[3] - p[4] * x; m <- pmax(l1, l2)
  y - (m + log(exp(l1 - m) + exp(l2 - m)))
}
jac <- function(p, y) {
  l1 <- p[1] - p[2] * x; l2 <- p[3] - p[4] * x
  w <- 1 / (1 + exp(l2 - l1)); v <- 1 - w
  -cbind(w, -w * x, v, -v * x)
}
aicc <- function(rss, p) { k <- p + 1; n * log(rss / n) + 2 * k + 2 * k * (k + 1) / (n - k - 1) }
control <- nls.lm.control(ftol = 1e-10, ptol = 1e-10, maxiter = 200)
first <- integer(nrow(y)); total <- 0
one <- function(i) {
  yi <- y[i, ]
  r1 <- sum(lm.fit(line, yi)$residuals^2)
  r2 <- sum(lm.fit(power, yi)$residuals^2)
  r3 <- nls.lm(s[1:4], fn = par2, jac = jac, control = control, y = yi)$deviance
  first[i] <<- which.min(c(aicc(r1, 2), aicc(r2, 3), aicc(r3, 4)))
  total <<- total + min(r1, r2, r3)
}
for (i in 1:20) one(i) # compiled by then
total <- 0
start <- proc.time()[["elapsed"]]
for (i in seq_len(nrow(y))) one(i)
cat(sprintf("%.6f %.15g\n", 1e6 * (proc.time()[["elapsed"]] - start) / nrow(y), total))
