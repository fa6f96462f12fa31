package stats_test

import (
	"fmt"
	"math"

	"kneepoint/stats/control"
	"kneepoint/stats/multivariate"
	"kneepoint/stats/series"
	"kneepoint/stats/variance"
	"kneepoint/stats/yield"
)

// Answers for variance components, yield models, control charts, sequences and
// several variables.
func init() {
	for name, m := range map[string]referenceMethod{
		"nested random-effects variance components lot / wafer(lot) / die by REML and by ML":              {answer: referenceREML},
		"nested random-effects variance components by ANOVA (method of moments, unbalanced coefficients)": {answer: referenceNestedANOVA},
		"Shewhart chart constants c#, A#, B#, B#, d#, d#, A#, D#, D#":                                     {answer: referenceConstants},
		"EWMA chart, lambda #, asymptotic limits, target #, s #, # sigma":                                 {answer: referenceEWMA},
		"EWMA chart with time-varying limits":                                                             {answer: referenceEWMA},
		"same data, full precision":                                                                       {answer: referenceFullPrecision},
		"tabular CUSUM, target #, k #, h #":                                                               {answer: referenceCUSUM},
		"tabular CUSUM (no head start)":                                                                   {answer: referenceCUSUM},
		"individuals chart, sigma = MRbar/#":                                                              {answer: referenceIndividuals},
		"same data, exact d# = #/sqrt(pi)":                                                                {answer: referenceIndividuals},
		"individuals and moving-range chart":                                                              {answer: referenceIndividuals},
		"p chart, # wafers of # chips":                                                                    {answer: referenceP},
		"p chart with binomial limits":                                                                    {answer: referenceP},
		"Laney p' chart":                                                                                  {answer: referenceP},
		"c chart, # wafers":                                                                               {answer: referenceC},
		"u chart with varying area":                                                                       {answer: referenceU},
		"xbar-s chart":                                                                                    {answer: referenceXbar},
		"xbar-R chart":                                                                                    {answer: referenceXbar},
		"Nelson's eight tests, hand-built sequence":                                                       {answer: referenceNelson},
		"Nelson's eight tests, shifted/stratified/mixture/trend segments":                                 {answer: referenceNelson},
		"single change point of the mean, optimal least-squares split":                                    {answer: referenceSplit},
		"multiple change points: binary segmentation and optimal partitioning, penalty #*sigma^#*log(n)": {answer: referenceChanges},
		"Pettitt change-point test": {answer: referencePettitt},
		"simple linear regression (drift): estimates, standard errors, # % CI, prediction":   {answer: referenceLine},
		"EWMA drift detection with a baseline of the first # points":                         {answer: referenceDrift},
		"autocorrelations, Ljung-Box, runs about the median":                                 {answer: referenceDependence},
		"polynomial least squares y = B# + B# x + ... (degree = number of coefficients - #)": {answer: referencePolynomial},
		"yield models Y(AD#)": {answer: referenceYield},
		"AD# that gives a stated yield (inverse of each model)":                                               {answer: referenceYield},
		"negative binomial ML fit to defects per die/wafer (alpha = size, mean = lambda), Poisson comparison": {answer: referenceDefects},
		"negative binomial fit to under-dispersed counts: no finite alpha":                                    {answer: referenceDefects},
		"principal components of the correlation matrix":                                                      {answer: referencePCA},
		"squared Mahalanobis distances (sample mean and covariance, n-#)":                                     {answer: referenceMahalanobis},
		"two-way median polish (rows first)":                                                                  {answer: referencePolish},
	} {
		referenceMethods[name] = m
	}
}

func (c *referenceCase) nested() *variance.Design {
	return variance.New([]variance.Level{{Name: "lot", Code: c.groups("lot")}, {Name: "wafer", Code: c.groups("wafer")}}, c.list("y"))
}

func referenceREML(c *referenceCase) map[string]any {
	d := c.nested()
	split := func(f variance.Fit) map[string]any {
		out := map[string]any{"mean": f.Mean.Estimate, "se_mean": f.SEMean, "loglik": f.LogLik, "loglik_reml": f.LogLik}
		for i, name := range []string{"lot", "wafer", "die"} {
			out["var_"+name] = f.Components[i].Variance.Estimate
			out["pct_"+name] = 100 * f.Components[i].Share.Estimate
		}
		return out
	}
	return map[string]any{"reml": split(d.REML(0.95)), "ml": split(d.ML(0.95))}
}

func referenceNestedANOVA(c *referenceCase) map[string]any {
	rows := c.nested().ANOVA(0.95)
	out := map[string]any{"k1": rows[1].Coefficient[1], "k2": rows[0].Coefficient[1], "k3": rows[0].Coefficient[0]}
	for i, name := range []string{"lot", "wafer", "die"} {
		out["ss_"+name], out["df_"+name], out["var_"+name] = rows[i].SS, rows[i].DF, rows[i].Variance.Estimate
	}
	return out
}

func referenceConstants(c *referenceCase) map[string]any {
	k := control.ConstantsFor(int(c.number("n")))
	return map[string]any{"c4": k.C4, "A3": k.A3, "B3": k.B3, "B4": k.B4, "d2": k.MeanRange, "d3": k.RangeSD, "A2": k.A2, "D3": k.D3, "D4": k.D4}
}

func referenceEWMA(c *referenceCase) map[string]any {
	// One pair of limits for all points is the asymptotic form.
	_, one := c.Expected["ucl"].(float64)
	r := control.EWMA(c.list("x"), c.number("target"), c.number("sigma"), control.EWMAOptions{Lambda: c.number("lambda"), L: c.number("L"), Asymptotic: one})
	out := map[string]any{"ewma": r.Points, "ucl": r.Upper, "lcl": r.Lower, "signals": r.Signals}
	if one {
		out["ucl"], out["lcl"] = r.Upper[0], r.Lower[0]
	}
	return out
}

func referenceFullPrecision(c *referenceCase) map[string]any {
	if _, ok := c.Inputs["lambda"]; ok {
		return referenceEWMA(c)
	}
	return referenceCUSUM(c)
}

func referenceCUSUM(c *referenceCase) map[string]any {
	s := control.CUSUM(c.list("x"), c.number("target"), c.number("k"), c.number("h"), 0)
	return map[string]any{"s_hi": s.High, "s_lo": s.Low, "signals_hi": s.SignalsHigh, "signals_lo": s.SignalsLow}
}

func referenceIndividuals(c *referenceCase) map[string]any {
	i, mr := control.Individuals(c.list("x"))
	if d2 := c.number("d2"); d2 == d2 { // a rounded constant
		i = control.Against(i.Points, i.Center, mr.Center/d2)
	}
	return map[string]any{"center": i.Center, "sigma": i.Sigma, "ucl": i.Upper[0], "lcl": i.Lower[0], "signals": i.Signals,
		"mr_bar": mr.Center, "mr_ucl": mr.Upper[0], "mr": mr.Points[1:]}
}

func referenceP(c *referenceCase) map[string]any {
	d, n := c.list("defectives"), c.list("n")
	r := control.P(d, n)
	if _, ok := c.Expected["sigma_z"]; ok {
		r = control.LaneyP(d, n)
	}
	return map[string]any{"p_bar": r.Center, "sigma_z": r.Sigma, "ucl": r.Upper, "lcl": r.Lower, "signals": r.Signals,
		"ucl_scalar": r.Upper[0], "lcl_scalar": r.Lower[0]}
}

func referenceC(c *referenceCase) map[string]any {
	r := control.C(c.list("counts"))
	return map[string]any{"c_bar": r.Center, "ucl": r.Upper[0], "lcl": r.Lower[0], "signals": r.Signals}
}

func referenceU(c *referenceCase) map[string]any {
	r := control.U(c.list("counts"), c.list("area"))
	return map[string]any{"u_bar": r.Center, "ucl": r.Upper, "lcl": r.Lower, "signals": r.Signals}
}

func referenceXbar(c *referenceCase) map[string]any {
	groups := c.table("subgroups")
	m, s := control.XbarS(groups)
	if _, ok := c.Expected["r_bar"]; ok {
		m, s = control.XbarR(groups)
	}
	return map[string]any{"grand_mean": m.Center, "sigma": m.Sigma, "xbar_ucl": m.Upper[0], "xbar_lcl": m.Lower[0], "means": m.Points,
		"s_bar": s.Center, "s_ucl": s.Upper[0], "s_lcl": s.Lower[0], "sds": s.Points,
		"r_bar": s.Center, "r_ucl": s.Upper[0], "r_lcl": s.Lower[0]}
}

func referenceNelson(c *referenceCase) map[string]any {
	r := control.Nelson(c.list("x"), c.number("center"), c.number("sigma"))
	out := map[string]any{"rule5_any": r.Any5, "rule6_any": r.Any6, "rule8_no_side_requirement": r.OneSided8}
	for k, s := range r.Signals {
		out["rule"+string(rune('1'+k))] = s
	}
	return out
}

func referenceSplit(c *referenceCase) map[string]any {
	s := series.SingleSplit(c.list("y"), int(c.number("min_segment")))
	return map[string]any{"split": s.At, "sse_no_change": s.SSENone, "sse_split": s.SSE, "gain": s.Gain, "sup_f": s.SupF,
		"mean_before": s.MeanBefore, "mean_after": s.MeanAfter}
}

func referenceChanges(c *referenceCase) map[string]any {
	y, min := c.list("y"), int(c.number("min_segment"))
	sigma := series.Sigma(y)
	penalty := series.Penalty(sigma, len(y))
	at, cost := series.OptimalPartition(y, min, penalty)
	greedy := series.BinarySegmentation(y, min, penalty)
	var means []float64
	for _, part := range series.Segments(y, greedy) {
		means = append(means, part.Mean)
	}
	return map[string]any{"sigma_mad_of_differences": sigma, "penalty": penalty, "binary_segmentation": greedy,
		"optimal_partitioning": at, "optimal_cost": cost, "segment_means_binseg": means}
}

func referencePettitt(c *referenceCase) map[string]any {
	p := series.Pettitt(c.list("y"))
	return map[string]any{"k": p.K, "split": p.At, "p_approx": p.P}
}

func referenceLine(c *referenceCase) map[string]any {
	l := series.FitLine(c.list("x"), c.list("y"))
	at := c.number("x_new")
	return map[string]any{"intercept": l.Intercept, "slope": l.Slope, "se_intercept": l.SEIntercept, "se_slope": l.SESlope,
		"t_slope": l.T, "p_slope": l.P, "intercept_ci95": ends(l.InterceptInterval(0.95)), "slope_ci95": ends(l.SlopeInterval(0.95)),
		"r_squared": l.RSquared, "residual_sd": l.ResidualSD, "f": l.F, "durbin_watson": l.DurbinWatson,
		"prediction": l.Mean(at, 0.95).Estimate, "mean_ci95": ends(l.Mean(at, 0.95)), "prediction_interval95": ends(l.Predict(at, 0.95))}
}

func referenceDrift(c *referenceCase) map[string]any {
	d := series.EWMADrift(c.list("y"), int(c.number("baseline")), c.number("lambda"), c.number("L"))
	half := make([]float64, len(d.Upper))
	for i, u := range d.Upper {
		half[i] = u - d.Center
	}
	out := map[string]any{"center": d.Center, "sigma": d.Sigma, "ewma": d.Points, "half_width": half, "signals": d.Signals, "first_signal": math.NaN()}
	if d.First >= 0 {
		out["first_signal"] = d.First
	}
	return out
}

func referenceDependence(c *referenceCase) map[string]any {
	y := c.list("y")
	one, five, r := series.LjungBox(y, 1), series.LjungBox(y, 5), series.Runs(y)
	return map[string]any{"acf_1_to_6": series.Autocorrelation(y, 6), "ljung_box_q1": one.Q, "ljung_box_p1": one.P, "ljung_box_q5": five.Q,
		"ljung_box_p5": five.P, "runs": r.Runs, "n_above": r.Above, "n_below": r.Below, "runs_expected": r.Expected, "runs_sd": r.SD, "runs_z": r.Z}
}

func referencePolynomial(c *referenceCase) map[string]any {
	// The degree is that of the answer asked for.
	p := series.FitPolynomial(c.list("x"), c.list("y"), len(c.Expected["coefficients"].([]any))-1)
	return map[string]any{"coefficients": p.Coefficients, "standard_errors": p.StandardErrors, "residual_sd": p.ResidualSD, "r_squared": p.RSquared}
}

func referenceYield(c *referenceCase) map[string]any {
	f, at := yield.Model.Yield, c.number("ad0")
	if y := c.number("yield"); y == y {
		f, at = yield.Model.Defects, y
	}
	out := map[string]any{"poisson": f(yield.Poisson, at), "murphy": f(yield.Murphy, at),
		"exponential_1_over_1_plus_ad": f(yield.Exponential, at), "seeds_exp_minus_sqrt_ad": f(yield.SeedsRoot, at)}
	for _, k := range c.list("layers") {
		out[fmt.Sprintf("bose_einstein_%g_layers", k)] = f(yield.BoseEinstein(k), at)
	}
	for _, a := range c.list("alpha") {
		out[fmt.Sprintf("negbin_alpha_%g", a)] = f(yield.NegativeBinomial(a), at)
	}
	return out
}

func referenceDefects(c *referenceCase) map[string]any {
	counts := c.list("counts")
	d := yield.FitDefects(counts, nil, 0.95)
	aic, aicPoisson := d.AIC()
	zeros := 0
	for _, x := range counts {
		if x == 0 {
			zeros++
		}
	}
	return map[string]any{"n": d.N, "mean": d.Mean, "variance": d.Variance, "dispersion_index": d.Dispersion,
		"alpha_ml": d.Alpha.Estimate, "alpha_finite": !math.IsInf(d.Alpha.Estimate, 1), "alpha_se_glmnb": d.AlphaSE,
		"loglik_negbin": d.LogLik, "loglik_poisson": d.LogLikPoisson, "lr_statistic": d.LR, "aic_negbin": aic, "aic_poisson": aicPoisson,
		"alpha_moments": d.AlphaMoments, "fraction_zero_observed": float64(zeros) / float64(d.N),
		"yield_negbin": d.Model().Yield(d.Density.Estimate), "yield_poisson": yield.Poisson.Yield(d.Mean)}
}

// columns turns rows into columns.
func (c *referenceCase) columns() (rows, columns [][]float64) {
	rows = c.table("rows")
	columns = make([][]float64, len(rows[0]))
	for _, row := range rows {
		for j, v := range row {
			columns[j] = append(columns[j], v)
		}
	}
	return rows, columns
}

func referencePCA(c *referenceCase) map[string]any {
	rows, columns := c.columns()
	p := multivariate.Components(columns)
	var scores [][]float64
	for _, row := range rows[:5] {
		scores = append(scores, p.Score(row))
	}
	return map[string]any{"mean": p.Mean, "sd": p.SD, "correlation": p.Correlation, "eigenvalues": p.Eigenvalues,
		"explained_fraction": p.Explained, "loadings_by_component": p.Loadings, "scores_first_5_rows": scores}
}

func referenceMahalanobis(c *referenceCase) map[string]any {
	_, columns := c.columns()
	d := multivariate.Mahalanobis(columns)
	most, above, limit := 0, 0, d.Limit(0.999)
	for i, v := range d.D2 {
		if v > d.D2[most] {
			most = i
		}
		if v > limit {
			above++
		}
	}
	return map[string]any{"d2": d.D2, "max_d2": d.D2[most], "index_max": most, "chi2_p_max": d.P(d.D2[most]),
		"chi2_limit_999": limit, "beta_limit_999": d.ExactLimit(0.999), "n_above_limit": above}
}

func referencePolish(c *referenceCase) map[string]any {
	parts := func(eps float64, sweeps int) map[string]any {
		p := multivariate.MedianPolish(c.table("rows"), eps, sweeps)
		return map[string]any{"overall": p.Overall, "row": p.Row, "col": p.Column, "residuals": p.Residual}
	}
	return map[string]any{"converged": parts(1e-12, 200), "default_eps_0_01": parts(0.01, 10)}
}
