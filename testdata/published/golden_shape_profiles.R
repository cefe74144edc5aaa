# Writes golden_shape_profiles.csv: Rscript golden_shape_profiles.R > golden_shape_profiles.csv,
# in this folder, with R 4.2.2. Profile-likelihood intervals (95 %) of curves with one bounded
# shape: the least sum of squares with a quantity held, over a grid of shapes and optimize
# between its points, the rest by lm.wfit or optimize, and its ends by uniroot. NA where a
# bound of the shape is met first.
R <- 8.31446261815324; c2 <- 6.62607015e-34 * 29979245800 / 1.380649e-23 # h c/k_B, cm K
cat("dataset,curve,model,quantity,lower,upper\n")
rd <- function(name) read.csv(paste0("synthetic/", name, ".csv"), comment.char = "#")

# ln k = ln A + E phi(T) + off(T) at the shape th; bounds; how the shape is reported;
# E_loc(T) = E alpha + beta.
curves <- list(
  vogel = list(phi = function(th, t) -1 / (t - th), off = function(th, t) 0 * t, E = "B", shape = "T0", line = TRUE,
    bounds = function(t, tr) c(0, 0.99 * min(t)), show = function(th) th,
    grid = function(b) c(seq(b[1], b[2] * 0.9, length.out = 300), b[2] / 0.99 * (1 - exp(seq(log(0.105), log(0.01), length.out = 100)))),
    alpha = function(th, T) R * T^2 / (T - th)^2 / 1000, beta = function(th, T) 0, Eunit = 1),
  deformed = list(phi = function(th, t) if (abs(th) < 1e-6 * R * min(t)) -1 / (R * t) - th / (2 * R^2 * t^2) else log1p(-th / (R * t)) / th,
    off = function(th, t) 0 * t, E = "E", shape = "", line = FALSE,
    bounds = function(t, tr) { de <- 0.99 * R * tr * c(-1, min(t) / (tr - min(t))); de / (1 + de / (R * tr)) },
    show = identity,
    grid = function(b) { u <- seq(0, 1, length.out = 300)[-1]; sort(unique(c(b[1] * u^4, 0, b[2] * (1 - (1 - u)^2)))) },
    alpha = function(th, T) 1 / (1 - th / (R * T)) / 1000, beta = function(th, T) 0, Eunit = 1000),
  "tunnelling-bell" = list(phi = function(th, t) -1 / (R * t), off = function(th, t) { w <- th / (2 * t); ifelse(w < 1e-4, w^2 / 6, log(w / sin(w))) },
    E = "E", shape = "nu", line = TRUE,
    bounds = function(t, tr) c(0, 0.99 * 2 * pi * min(t)), show = function(th) th / c2,
    grid = function(b) b[2] * (1 - (1 - seq(0, 1, length.out = 400))^2),
    alpha = function(th, T) 1 / 1000, beta = function(th, T) { w <- th / (2 * T); if (w < 1e-4) -R * th / 2 * w / 3 / 1000 else -R * th / 2 * (1 / w - 1 / tan(w)) / 1000 }, Eunit = 1000))

# rss of the best lnA, and the nuisance columns X, beside the given f = ln k - lnA.
study <- function(name, curve, model, t, k, v = rep(1, length(t)), X = NULL, known = FALSE) {
  cv <- curves[[curve]]; inK <- model %in% c("absolute", "stated-absolute"); y <- if (all(k > 0)) log(k)
  w <- 1 / v; tr <- sum(w) / sum(w / t); b <- cv$bounds(t, tr); range <- b[2] - b[1]
  lnS <- log(max(abs(k))); ks <- k / exp(lnS)
  if (inK) w <- w * exp(2 * lnS)
  one <- rep(1, length(t))
  lsq <- function(y, D) sum(w * lm.wfit(D, y, w, tol = 1e-13)$residuals^2)
  freeA <- function(f) if (inK) { e <- exp(f - max(f)); a <- sum(w * e * ks) / sum(w * e^2); if (a > 0) sum(w * (ks - a * e)^2) else sum(w * ks^2) } else lsq(y - f, cbind(one, X))
  fixA <- function(lnA, f) if (inK) sum(w * (ks - exp(lnA - lnS + f))^2) else if (is.null(X)) sum(w * (y - lnA - f)^2) else lsq(y - lnA - f, X)
  # E free: by lm, with errors in k by optimize about a guess.
  overE <- function(guess, S) { s <- 0.3 * abs(guess); o <- optimize(S, guess + c(-s, s), tol = 1e-10 * s); o <- optimize(S, o$minimum + c(-1, 1) * 1e-3 * s, tol = 1e-13 * s); o$objective }
  guess <- function(th) { u <- pmax(ks, 1e-300); unname(lm.wfit(cbind(1, cv$phi(th, t)), log(u) - cv$off(th, t), if (inK) u^2 * w else w)$coefficients[2]) }
  line <- function(th) if (inK) overE(guess(th), function(E) freeA(E * cv$phi(th, t) + cv$off(th, t))) else lsq(y - cv$off(th, t), cbind(one, cv$phi(th, t), X))
  atA <- function(lnA, th) if (inK) {
      p <- cv$phi(th, t); j <- which.max(ks); overE((log(ks[j]) + lnS - lnA - cv$off(th, t)[j]) / p[j], function(E) fixA(lnA, E * p + cv$off(th, t)))
    } else lsq(y - lnA - cv$off(th, t), cbind(cv$phi(th, t), X))
  atE <- function(E, th) freeA(E * cv$phi(th, t) + cv$off(th, t))
  grid <- cv$grid(b); where <- NA
  least <- function(S) {
    v <- sapply(grid, S); v[!is.finite(v)] <- Inf; j <- which.min(v); n <- length(grid)
    lo <- grid[max(1, j - 1)]; hi <- grid[min(n, j + 1)]
    o <- optimize(S, c(lo, hi), tol = 1e-11 * range); m <- o$minimum; d <- min(1e-4 * (hi - lo), m - b[1], b[2] - m)
    if (d > 0) o <- optimize(S, m + c(-d, d), tol = 1e-14 * range)
    if (v[j] < o$objective) { o$objective <- v[j]; o$minimum <- grid[j] }
    where <<- o$minimum; o$objective
  }
  smin <- least(line); th <- where; nu <- length(t) - 3 - length(X) / length(t)
  crit <- if (known) qchisq(0.95, 1) else smin / nu * qf(0.95, 1, nu)
  # the estimate
  f <- cv$phi(th, t)
  if (inK) { g0 <- guess(th); s <- 0.3 * abs(g0); E <- optimize(function(E) atE(E, th), g0 + c(-s, s), tol = 1e-10 * s)$minimum
    e <- exp(E * f + cv$off(th, t)); lnA <- log(sum(w * e * ks) / sum(w * e^2)) + lnS
  } else { co <- lm.wfit(cbind(one, f, X), y - cv$off(th, t), w, tol = 1e-13)$coefficients; lnA <- unname(co[1]); E <- unname(co[2]) }
  ends <- function(what, S, value, step, limits = c(-Inf, Inf)) {
    one <- function(dir) {
      at <- value; s <- step * dir; lim <- limits[if (dir < 0) 1 else 2]
      for (i in 1:60) {
        g <- at + s; if ((g - lim) * dir >= 0) g <- lim
        if (S(g) - smin >= crit) {
          root <- function(g) sqrt(max(0, S(g) - smin)) - sqrt(crit)
          fa <- root(at); fg <- root(g); if (fa >= 0) fa <- -1e-12
          u <- if (dir > 0) uniroot(root, c(at, g), f.lower = fa, f.upper = fg, tol = 1e-12 * abs(g - at))$root else uniroot(root, c(g, at), f.lower = fg, f.upper = fa, tol = 1e-12 * abs(g - at))$root
          S(u); tight <- if (cv$line) where > b[2] - 1e-7 * range else min(where - b[1], b[2] - where) < 1e-7 * range
          return(if (tight) NA else u)
        }
        if (g == lim) return(NA)
        at <- g; s <- s * 1.6
      }
      NA
    }
    r <- c(one(-1), one(1)); cat(sprintf("%s,%s,%s,%s,%.12g,%.12g\n", name, curve, model, what, r[1], r[2]))
  }
  if (curve == "deformed") { d <- th / E
    ends("d", function(g) if (g == 0) line(0) else { S <- function(th) atE(th / g, th); grid0 <- grid
      # E is near its estimate: shapes about g E matter most
      grid <<- sort(g * E * exp(seq(-1, 1, length.out = 200))); grid <<- grid[grid >= b[1] & grid <= b[2]]; r <- if (length(grid) > 3) least(S) else Inf; grid <<- grid0; r },
      d, abs(d) / 7)
  } else { at <- function(x) x * b[2] / cv$show(b[2]); ends(cv$shape, function(g) { where <<- NA; where <<- (b[1] + b[2]) / 2; line(at(g)) }, cv$show(th), cv$show(th) / 9, cv$show(b)) }
  ends("ln_A", function(g) least(function(th) atA(g, th)), lnA, abs(lnA) / 40)
  ends(cv$E, function(g) least(function(th) atE(g * cv$Eunit, th)), E / cv$Eunit, abs(E) / cv$Eunit / 30)
  # The second quantity is E_loc at the reference temperature, the third that at T_min.
  for (q in list(list("E_ref", tr), list("E_min", min(t)))) {
    a <- function(th) cv$alpha(th, q[[2]]); be <- function(th) cv$beta(th, q[[2]])
    ends(q[[1]], function(g) least(function(th) atE((g - be(th)) / a(th), th)), E * a(th) + be(th), 0.01 * abs(E * a(th)))
  }
  if (curve != "tunnelling-bell") {
    a <- function(th) cv$alpha(th, max(t)) - cv$alpha(th, min(t)); v0 <- E * a(th); grid <- grid[grid != 0]
    lim <- if (cv$line) (if (v0 < 0) c(-Inf, -1e-9) else c(1e-9, Inf)) else c(-Inf, Inf)
    ends("dE", function(g) if (abs(g) < 1e-8) line(0) else least(function(th) if (sign(a(th) * E) == sign(g)) atE(g / a(th), th) else Inf), v0, abs(v0) / 9, lim)
  }
}
for (x in list(c("s7_vft", "vogel"), c("s4_series", "vogel"), c("s1_straight", "vogel"), c("s2_tn_curved", "deformed"), c("s1_straight", "deformed"), c("s7_vft", "deformed"),
               c("s3_parallel", "tunnelling-bell"), c("s2_tn_curved", "tunnelling-bell"), c("s8_tiny6", "tunnelling-bell"))) {
  d <- rd(x[1]); try(study(x[1], x[2], "relative", d$T_K, d$k))
}
d <- rd("s5_hetero"); s <- (d$sigma_k / d$k)^2
for (curve in c("deformed", "tunnelling-bell")) {
  try(study("s5_hetero", curve, "scaled", d$T_K, d$k, s)); try(study("s5_hetero", curve, "stated", d$T_K, d$k, s, known = TRUE))
}
# Two laboratories, row by row in turn.
d <- rd("s7_vft"); study("s7_vft", "vogel", "offsets", d$T_K, d$k, X = cbind(rep_len(c(0, 1), nrow(d))))
d <- rd("s2_tn_curved"); study("s2_tn_curved", "deformed", "offsets", d$T_K, d$k, X = cbind(rep_len(c(0, 1), nrow(d))))
# Errors in k. MGH10 of NIST at temperatures moved by 400.
k <- c(34780, 28610, 23650, 19630, 16370, 13720, 11540, 9744, 8261, 7030, 6005, 5147, 4427, 3820, 3307, 2872)
study("MGH10", "vogel", "absolute", 450 + 5 * (0:15), k)
study("MGH10", "vogel", "stated-absolute", 450 + 5 * (0:15), k, rep(4, 16), known = TRUE)
for (x in list(c("s7_vft", "vogel"), c("s2_tn_curved", "deformed"), c("s3_parallel", "tunnelling-bell"), c("s1_straight", "vogel"))) {
  d <- rd(x[1]); try(study(x[1], x[2], "absolute", d$T_K, d$k))
}
