# Writes golden_leaveout.csv: Rscript golden_leaveout.R > golden_leaveout.csv, in this
# folder, with R 4.2.2. The exponent test by lm, without each
# temperature and point; what errors of temperature do; Spearman's test by cor.test.
out <- function(d, f, q, v) cat(sprintf("%s,%s,%s,%.17g\n", d, f, q, v))
cat("dataset,fit,quantity,value\n")
R <- 8.31446261815324
rd <- function(name) read.csv(paste0("synthetic/", name, ".csv"), comment.char = "#")
bendof <- function(z) ifelse(abs(z) < 0.05, z^2/2 - z^3/3 + z^4/4 - z^5/5 + z^6/6 - z^7/7 + z^8/8 - z^9/9 + z^10/10, z - log1p(z))

# n, its standard error and p; known: weights are 1/variance, else up to a factor.
power <- function(t, y, w = rep(1, length(t)), known = FALSE, lab = NULL) {
  t0 <- mean(t); z <- (t0 - t) / t; b <- bendof(z)
  m <- if (is.null(lab)) lm(y ~ z + b, weights = w, tol = 1e-14) else lm(y ~ z + b + lab, weights = w, tol = 1e-14)
  s <- summary(m); nu <- m$df.residual
  n <- unname(coef(m)["b"]); u <- sqrt(s$cov.unscaled["b", "b"])
  se <- if (known) u else u * s$sigma
  p <- if (known) 2 * pnorm(-abs(n / se)) else 2 * pt(-abs(n / se), nu)
  q <- if (known) qnorm(0.975) else qt(0.975, nu)
  list(n = n, se = se, p = p, lo = n - q * se, hi = n + q * se)
}
say <- function(d, f, what, r) { out(d, f, paste0("n:", what), r$n); out(d, f, paste0("se:", what), r$se); out(d, f, paste0("p:", what), r$p) }

for (name in c("s1_straight", "s2_tn_curved")) {
  d <- rd(name)
  for (i in seq_len(nrow(d))) say(name, "relative", sprintf("row%d", i + 1), power(d$T_K[-i], log(d$k[-i])))
}
d <- rd("s5_hetero"); s <- d$sigma_k / d$k
for (i in seq_len(nrow(d))) {
  say("s5_hetero", "stated", sprintf("row%d", i + 1), power(d$T_K[-i], log(d$k[-i]), 1 / s[-i]^2, TRUE))
  say("s5_hetero", "scaled", sprintf("row%d", i + 1), power(d$T_K[-i], log(d$k[-i]), 1 / s[-i]^2))
}
# Errors in k: Gauss-Newton by lm, and p by the F test of n = 0.
newton <- function(k, x, n) {
  b <- coef(lm(log(k) ~ x - 1, weights = k^2, tol = 1e-14))
  for (i in 1:200) { f <- exp(drop(x %*% b)); b <- b + coef(lm(I(k - f) ~ I(f * x) - 1, tol = 1e-14)) }
  list(b = unname(b), rss = sum((k - exp(drop(x %*% b)))^2))
}
for (i in c(1, 8, 15)) {
  e <- d[-i, ]; t0 <- mean(e$T_K); z <- (t0 - e$T_K) / e$T_K; k <- e$k / max(e$k)
  m3 <- newton(k, cbind(1, z, bendof(z))); m2 <- newton(k, cbind(1, z))
  nu <- nrow(e) - 3; f <- (m2$rss - m3$rss) / (m3$rss / nu)
  out("s5_hetero", "absolute", sprintf("n:row%d", i + 1), m3$b[3])
  out("s5_hetero", "absolute", sprintf("p:row%d", i + 1), pf(f, 1, nu, lower.tail = FALSE))
}
# Repeats: on means without a temperature and without a point, and on points.
d <- rd("s6_replicates")
means <- function(d) { g <- factor(d$T_K); list(t = as.numeric(levels(g)), y = as.numeric(tapply(log(d$k), g, mean)), w = as.numeric(table(g))) }
for (tt in unique(d$T_K)) {
  m <- means(d[d$T_K != tt, ])
  say("s6_replicates", "means", sprintf("T%g", tt), power(m$t, m$y, m$w))
  e <- d[d$T_K != tt, ]
  say("s6_replicates", "points", sprintf("T%g", tt), power(e$T_K, log(e$k)))
}
for (i in seq_len(nrow(d))) {
  m <- means(d[-i, ])
  say("s6_replicates", "means", sprintf("row%d", i + 1), power(m$t, m$y, m$w))
  say("s6_replicates", "points", sprintf("row%d", i + 1), power(d$T_K[-i], log(d$k[-i])))
}
# Three sources in turn, an offset for each: without a point, and without a temperature.
lab <- factor(c("A", "B", "C")[(seq_len(nrow(d)) - 1) %% 3 + 1])
for (i in seq_len(nrow(d))) say("s6_replicates", "sources", sprintf("row%d", i + 1), power(d$T_K[-i], log(d$k[-i]), lab = lab[-i]))
for (tt in unique(d$T_K)) { k <- d$T_K != tt; say("s6_replicates", "sources", sprintf("T%g", tt), power(d$T_K[k], log(d$k[k]), lab = lab[k])) }

# Errors of temperature: recorded T = true T + delta s(T).
shape <- function(name, t) { u <- (t - min(t)) / (max(t) - min(t)); switch(name, offset = rep(1, length(t)), gain = u, bow = 4 * u * (1 - u)) }
errors <- function(name, y, t, w, known, fit, edge, end, far = 50) {
  whole <- power(t, y, w, known)
  t0 <- mean(t); z <- (t0 - t) / t; b <- bendof(z)
  yfit <- fitted(lm(y ~ z + b, weights = w, tol = 1e-14))
  for (sh in c("offset", "gain", "bow")) {
    s <- shape(sh, t)
    at <- function(d) power(t - d * s, y, w, known)
    # On exact data the error of 1 K moves n by minus what the correction does.
    slope <- function(h) -(power(t - h * s, yfit, w)$n - power(t + h * s, yfit, w)$n) / (2 * h)
    out(name, fit, paste0(sh, ":dn"), (4 * slope(0.01) - slope(0.02)) / 3)
    for (what in c("band", "lost")) {
      f <- function(d) if (what == "band") at(d)$n - edge else at(d)[[end]] - edge
      way <- sign((whole$n - edge) / slope(0.01))
      r <- tryCatch(uniroot(f, sort(c(0, way * far)), tol = 1e-13)$root, error = function(e) NaN)
      out(name, fit, paste0(sh, ":", what), r)
    }
  }
}
options(warn = -1)
d <- rd("s2_tn_curved"); errors("s2_tn_curved", log(d$k), d$T_K, rep(1, nrow(d)), FALSE, "relative", 1, "lo")
d <- rd("s3_parallel"); errors("s3_parallel", log(d$k), d$T_K, rep(1, nrow(d)), FALSE, "relative", 1, "lo")
d <- rd("s7_vft"); errors("s7_vft", log(d$k), d$T_K, rep(1, nrow(d)), FALSE, "relative", 0, "hi")
d <- rd("s4_series"); errors("s4_series", log(d$k), d$T_K, rep(1, nrow(d)), FALSE, "relative", 0, "hi")

# Spearman's rank correlation.
x <- list(c(3, 1, 4, 2, 5), c(2, 7, 1, 8, 3, 6, 4, 5), c(9, 7, 8, 6, 5, 3, 4, 1, 2), c(1, 3, 2, 4), c(12, 3, 7, 1, 9, 2, 11, 4, 8, 5, 10, 6), c(1, 2, 2, 3, 5, 4, 6))
y <- list(c(0.1, -0.3, 0.5, 0.2, 0.4), c(0.3, 0.1, -0.2, 0.9, -0.5, 0.4, 0.25, -0.1), c(-4, -1, -3, 0.5, 0.2, 0.1, 1, 3, 2), c(1, 2, 3, 4), c(0.9, 0.4, 0.1, -0.6, 0.3, 0.2, 1.4, -0.2, 0.5, 1.1, 0.7, -0.1), c(0.1, 0.2, 0.4, 0.3, 0.9, 0.5, 0.6))
for (i in seq_along(x)) {
  ties <- anyDuplicated(x[[i]]) > 0
  r <- cor.test(x[[i]], y[[i]], method = "spearman", exact = length(x[[i]]) <= 9 && !ties)
  out("spearman", paste0("case", i), "rho", unname(r$estimate)); out("spearman", paste0("case", i), "p", r$p.value)
}
