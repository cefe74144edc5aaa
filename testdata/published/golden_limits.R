# Writes golden_limits_r.csv: Rscript golden_limits.R > golden_limits_r.csv, in this folder,
# with R 4.2.2 and survival 3.5. Limits beside a factor for the source, which are
# contrasts that add up to 0; log-normal errors with σ estimated (relative) or held at
# 0.05 (stated), and the sources as one (pooled). At lower and upper the likelihood of the
# exponent held has fallen as far as the 95 % interval allows: 2 Δ ln L is n ln(1 + t²/ν),
# with 14 measured points and 8 degrees of freedom, or z².
library(survival)
out <- function(m, c, q, v) cat(sprintf("%s,%s,%s,%.17g\n", m, c, q, v))
cat("dataset,fit,quantity,value\n")
d <- read.csv("limits_sources.csv", na.strings = "NA")
d$lo <- ifelse(d$limit == "<", NA, d$k); d$hi <- ifelse(d$limit == ">", NA, d$k)
d$s <- factor(d$source)
d$x <- 1000 / d$T_K - 1000 / 300; d$l <- log(d$T_K / 300)
y <- quote(Surv(lo, hi, type = "interval2"))
tight <- survreg.control(rel.tolerance = 1e-13, maxiter = 200)
for (curve in c("straight", "power-prefactor")) for (sources in c(TRUE, FALSE)) for (scale in c(0, 0.05)) {
  right <- c("x", if (curve == "power-prefactor") "l", if (sources) "s")
  f <- as.formula(paste(deparse(y), "~", paste(right, collapse = " + ")))
  environment(f) <- environment()
  contrasts(d$s) <- contr.sum(nlevels(d$s))
  r <- survreg(f, data = d, dist = "lognormal", scale = scale, control = tight)
  m <- paste0(if (scale == 0) "relative" else "stated", if (!sources) "-pooled")
  last <- if (curve == "straight") "x" else "l"
  out(m, curve, last, coef(r)[last]); out(m, curve, paste0("sd:", last), sqrt(vcov(r)[last, last]))
  if (sources) for (i in 1:3) out(m, curve, paste0("offset", i), coef(r)[paste0("s", i)])
  out(m, curve, "sigma", r$scale); out(m, curve, "logLik", r$loglik[2])
}
contrasts(d$s) <- contr.sum(nlevels(d$s))
for (scale in c(0, 0.05)) {
  fit <- function(f) survreg(f, data = d, dist = "lognormal", scale = scale, control = tight)$loglik[2]
  best <- fit(Surv(lo, hi, type = "interval2") ~ x + l + s)
  w <- if (scale == 0) 14 * log1p(qt(0.975, 8)^2 / 8) else qnorm(0.975)^2
  rise <- function(n) { d$o <<- n * d$l; 2 * (best - fit(Surv(lo, hi, type = "interval2") ~ x + s + offset(o))) - w }
  m <- if (scale == 0) "relative" else "stated"
  out(m, "power-prefactor", "lower", uniroot(rise, c(-60, 3), tol = 1e-12)$root)
  out(m, "power-prefactor", "upper", uniroot(rise, c(5, 80), tol = 1e-12)$root)
}
# Free and held offsets, and the likelihood-ratio test of the offsets: F is
# ν (exp(W/n) - 1)/3, or W/3 where σ is known. u(n) as reported holds sqrt(n/ν).
for (scale in c(0, 0.05)) {
  m <- if (scale == 0) "relative" else "stated"
  free <- survreg(Surv(lo, hi, type = "interval2") ~ x + l + s, data = d, dist = "lognormal", scale = scale, control = tight)
  one <- survreg(Surv(lo, hi, type = "interval2") ~ x + l, data = d, dist = "lognormal", scale = scale, control = tight)
  d$o <- drop(model.matrix(~ s, d)[, -1] %*% coef(free)[4:6])
  held <- survreg(Surv(lo, hi, type = "interval2") ~ x + l + offset(o), data = d, dist = "lognormal", scale = scale, control = tight)
  out(m, "power-prefactor", "vif", vcov(free)["l", "l"] / vcov(held)["l", "l"])
  w <- 2 * (free$loglik[2] - one$loglik[2])
  f <- if (scale == 0) 8 * expm1(w / 14) / 3 else w / 3
  out(m, "power-prefactor", "f", f)
  out(m, "power-prefactor", "p", if (scale == 0) pf(f, 3, 8, lower.tail = FALSE) else pchisq(w, 3, lower.tail = FALSE))
  zero <- survreg(Surv(lo, hi, type = "interval2") ~ x + s, data = d, dist = "lognormal", scale = scale, control = tight)
  w <- 2 * (free$loglik[2] - zero$loglik[2])
  out(m, "power-prefactor", "p:n", if (scale == 0) pf(8 * expm1(w / 14), 1, 8, lower.tail = FALSE) else pchisq(w, 1, lower.tail = FALSE))
}
