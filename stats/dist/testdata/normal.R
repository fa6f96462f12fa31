# Rscript normal.R > normal.json   (R 4.2.2, base only)
# Values for the tests of stats/dist: tails of the normal distribution, a fit to
# readings known between two values, and a fit with a mean for each group.
fmt <- function(x) paste0("[", paste(ifelse(is.finite(x), trimws(formatC(x, digits = 17, format = "g")), "null"), collapse = ","), "]")
z <- c(-1e6, -1e4, -300, -60, -38, -37, -36.5, -36, -35.5, -20, -8, -5.5, -5, -1, -1e-8, 0, 1e-8, 0.7, 4.9, 5.1, 8, 12)
cat('{"z":', fmt(z), ',\n "log_phi":', fmt(pnorm(z, log.p = TRUE)), ',\n "hazard":', fmt(exp(dnorm(z, log = TRUE) - pnorm(z, log.p = TRUE))), ',\n', sep = "")

# Maximum by Nelder-Mead, then BFGS, repeated from its own result; standard errors
# from the numerical Hessian at the top.
top <- function(f, p) { for (i in 1:6) { p <- optim(p, f, control = list(reltol = 1e-16, maxit = 20000))$par; p <- optim(p, f, method = "BFGS", control = list(reltol = 1e-16, maxit = 5000))$par }; p }
dd <- function(a, b, m, s) { u <- pmin(-(a - m)/s, (b - m)/s) # log(Phi(b)-Phi(a)) in the better tail
  lo <- ifelse((a - m) > 0, pnorm((a - m)/s, lower.tail = FALSE, log.p = TRUE), pnorm((b - m)/s, log.p = TRUE))
  hi <- ifelse((a - m) > 0, pnorm((b - m)/s, lower.tail = FALSE, log.p = TRUE), pnorm((a - m)/s, log.p = TRUE))
  lo + log1p(-exp(hi - lo)) }
set.seed(20260101)
y <- rnorm(60, 42, 0.9); a <- floor(y/0.5)*0.5; b <- a + 0.5       # a coarse converter
a[1:5] <- -Inf; b[6:9] <- Inf; a[10:20] <- b[10:20] <- round(y[10:20], 3)
nll <- function(p) { m <- p[1]; s <- exp(p[2]); e <- a == b; -sum(dnorm(a[e], m, s, log = TRUE)) - sum(dd(a[!e], b[!e], m, s)) }
p <- top(nll, c(42, 0)); H <- optimHess(p, nll, control = list(ndeps = c(1e-4, 1e-4))); V <- solve(H)
cat(' "lower":', fmt(a), ',\n "upper":', fmt(b), ',\n "between": {"mu":', formatC(p[1], digits = 12), ', "sigma":', formatC(exp(p[2]), digits = 12), ', "loglik":', formatC(-nll(p), digits = 14),
    ', "se_mu":', formatC(sqrt(V[1, 1]), digits = 9), ', "se_log_sigma":', formatC(sqrt(V[2, 2]), digits = 9), ', "cov":', formatC(V[1, 2], digits = 9), '},\n', sep = "")

g <- rep(1:4, c(12, 20, 9, 15)); x <- round(rnorm(length(g), c(78, 79, 76, 80)[g], 2), 2); k <- as.integer(x >= 80); x <- pmin(x, 80); k[x < 75] <- -1; x <- pmax(x, 75)
ngl <- function(p) { m <- p[g]; s <- exp(p[5]); -sum(dnorm(x, m, s, log = TRUE)[k == 0]) - sum(pnorm(x, m, s, lower.tail = FALSE, log.p = TRUE)[k == 1]) - sum(pnorm(x, m, s, log.p = TRUE)[k == -1]) }
p <- top(ngl, c(78, 79, 76, 80, log(2))); V <- solve(optimHess(p, ngl, control = list(ndeps = rep(1e-4, 5))))
cat(' "x":', fmt(x), ',\n "censor":', fmt(k), ',\n "group":', fmt(g), ',\n "groups": {"mu":', fmt(p[1:4]), ', "sigma_ml":', formatC(exp(p[5]), digits = 12), ', "se_log_sigma":', formatC(sqrt(V[5, 5]), digits = 9), ', "loglik":', formatC(-ngl(p), digits = 14), '}}\n', sep = "")
