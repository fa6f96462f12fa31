# Rscript families.R > families.json   (R 4.2.2, base only)
# Values for the tests of stats/dist: fits of four families to readings that are
# exact, bounded, known between limits or screened, with standard errors from the
# numerical Hessian and a profile interval of a quantile; and gamma quantiles.
num <- function(x) paste0("[", paste(ifelse(is.finite(x), trimws(formatC(x, digits = 17, format = "g")), "null"), collapse = ","), "]")
top <- function(f, p) { for (i in 1:8) { p <- optim(p, f, control = list(reltol = 1e-16, maxit = 20000))$par; p <- optim(p, f, method = "BFGS", control = list(reltol = 1e-16, maxit = 5000))$par }; p }
fam <- list( # by working parameters: location, logarithm of the spread (for gamma ln mean, ln shape)
  normal = list(d = function(x, p) dnorm(x, p[1], exp(p[2]), log = TRUE), p = function(x, p, up = FALSE) pnorm(x, p[1], exp(p[2]), lower.tail = !up), q = function(u, p) qnorm(u, p[1], exp(p[2]))),
  lognormal = list(d = function(x, p) dlnorm(x, p[1], exp(p[2]), log = TRUE), p = function(x, p, up = FALSE) plnorm(x, p[1], exp(p[2]), lower.tail = !up), q = function(u, p) qlnorm(u, p[1], exp(p[2]))),
  weibull = list(d = function(x, p) dweibull(x, exp(-p[2]), exp(p[1]), log = TRUE), p = function(x, p, up = FALSE) pweibull(x, exp(-p[2]), exp(p[1]), lower.tail = !up), q = function(u, p) qweibull(u, exp(-p[2]), exp(p[1]))),
  gamma = list(d = function(x, p) dgamma(x, exp(p[2]), scale = exp(p[1] - p[2]), log = TRUE), p = function(x, p, up = FALSE) pgamma(x, exp(p[2]), scale = exp(p[1] - p[2]), lower.tail = !up), q = function(u, p) qgamma(u, exp(p[2]), scale = exp(p[1] - p[2]))))
out <- character(0)
case <- function(name, f, lo, hi, start, from = -Inf, to = Inf, pq = 0.01) {
  F <- fam[[f]]; e <- lo == hi
  between <- function(a, b, p) ifelse(F$p(a, p) > 0.5, F$p(a, p, TRUE) - F$p(b, p, TRUE), F$p(b, p) - F$p(a, p))
  nll <- function(p) { s <- -sum(F$d(lo[e], p)) - sum(log(between(pmax(lo[!e], from), pmin(hi[!e], to), p))) + length(lo)*log(between(from, to, p)); if (is.finite(s)) s else 1e10 }
  p <- top(nll, start); H <- optimHess(p, nll, control = list(ndeps = c(1e-4, 1e-4)*pmax(1e-2, abs(p)*0 + 1))); V <- solve(H); best <- nll(p)
  # Profile of the quantile: minimise over the spread with the location solved for.
  prof <- function(q) { g <- function(b) { a <- if (f == "normal") q - qnorm(pq)*exp(b) else if (f == "lognormal") log(q) - qnorm(pq)*exp(b) else if (f == "weibull") log(q) - log(-log1p(-pq))*exp(b) else log(q) - log(qgamma(pq, exp(b), scale = exp(-b))); nll(c(a, b)) }
    near <- 6*sqrt(V[2, 2]); far <- if (f == "normal") seq(-4, 9, length = 400) else near # the profile of a screened normal is wide
    min(optimize(g, p[2] + c(-near, near), tol = 1e-10)$objective, sapply(p[2] + far, g)) - best - qchisq(0.95, 1)/2 }
  q <- F$q(pq, p); s <- if (f == "normal") exp(p[2]) else q*(if (f == "gamma") exp(-p[2]/2) else exp(p[2]))
  w <- s; while (prof(q - w) < 0 && w < 1e3*s) w <- w*1.3; L <- if (w < 1e3*s) uniroot(prof, c(q - w, q), tol = 1e-11)$root else -Inf
  w <- s; while (prof(q + w) < 0) w <- w*1.3; U <- uniroot(prof, c(q, q + w), tol = 1e-11)$root
  out <<- c(out, paste0(' {"name": "', name, '", "family": "', f, '",\n  "lower": ', num(lo), ',\n  "upper": ', num(hi), ',\n  "from": ', sub("[][]", "", sub("[][]", "", num(from))), ', "to": ', sub("[][]", "", sub("[][]", "", num(to))),
    ', "a": ', formatC(p[1], digits = 12), ', "b": ', formatC(p[2], digits = 12), ', "loglik": ', formatC(-best, digits = 14),
    ', "var_aa": ', formatC(V[1, 1], digits = 8), ', "cov_ab": ', formatC(V[1, 2], digits = 8), ', "var_bb": ', formatC(V[2, 2], digits = 8), ', "p": ', pq, ', "quantile": ', formatC(q, digits = 12), ', "profile": ', num(c(L, U)), "}"))
}
clamp <- function(x, a, b) list(lo = ifelse(x <= a, -Inf, pmin(x, b)), hi = ifelse(x >= b, Inf, pmax(x, a)))
set.seed(20260301)
x <- round(rgamma(70, 4, scale = 0.5), 3); case("exact", "gamma", x, x, c(log(2), log(4)), pq = 0.95)
k <- clamp(x, 1, 3.5); case("floor and clamp", "gamma", k$lo, k$hi, c(log(2), log(4)), pq = 0.95)
x <- round(rgamma(60, 1800, scale = 42/1800), 2); k <- clamp(x, 0, 43); case("narrow, clamp", "gamma", k$lo, k$hi, c(log(42), log(1800)))
x <- rweibull(80, 14, 96); case("coarse", "weibull", floor(x/5)*5, floor(x/5)*5 + 5, c(log(96), -log(14)))
case("exact", "weibull", round(x, 2), round(x, 2), c(log(96), -log(14)))
x <- round(rnorm(150, 42, 0.9), 3); y <- x[x >= 41.2 & x <= 43.5]; case("screened", "normal", y, y, c(42, 0), 41.2, 43.5)
k <- clamp(x[x >= 41.2], -Inf, 42.8); case("screened below, clamped above", "normal", k$lo, k$hi, c(42, 0), 41.2, Inf)
x <- round(rlnorm(200, 0.6, 0.55), 3); y <- x[x <= 4]; case("screened above", "lognormal", y, y, c(0.6, -0.6), -Inf, 4, 0.9)
x <- round(rweibull(200, 14, 96), 2); y <- x[x >= 80]; case("screened below", "weibull", y, y, c(log(96), -log(14)), 80, Inf)
x <- round(rgamma(200, 4, scale = 0.5), 3); y <- x[x >= 0.8 & x <= 4]; case("screened", "gamma", y, y, c(log(2), log(4)), 0.8, 4, 0.95)
sh <- c(0.3, 0.3, 4, 4, 2200, 2200, 1e6, 1e6); u <- c(1e-4, 0.99, 1e-6, 0.99865, 0.00135, 1 - 1e-9, 0.00135, 0.99865)
cat('{"fits": [\n', paste(out, collapse = ",\n"), '],\n "gamma_shape": ', num(sh), ',\n "gamma_p": ', num(u), ',\n "gamma_quantile": ', num(qgamma(u, sh)), "}\n", sep = "")
