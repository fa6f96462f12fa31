package stats_test

import (
	"math"

	"gonum.org/v1/gonum/stat/distuv"
	"kneepoint/stats"
	"kneepoint/stats/capability"
	"kneepoint/stats/dist"
	"kneepoint/stats/yield"
)

// referenceMethods answers methods by their name with # for numbers.
var referenceMethods = map[string]referenceMethod{
	"mean, sample standard deviation (n-#), lag-# autocorrelation r# = sum (y_t-m)(y_{t+#}-m) / sum (y_t-m)^#": {answer: referenceStRD},
	"descriptive and robust statistics":               {answer: referenceDescribe},
	"descriptive, constant sample":                    {answer: referenceDescribe},
	"descriptive, n = #":                              {answer: referenceDescribe},
	"Huber M-estimators of location, k = #":           {answer: referenceHuber},
	"geometric mean and geometric sd":                 {answer: referenceGeometric},
	"Cp, Cpu, Cpl, Cpk, k from given mean and sd":     {answer: referenceIndices},
	"Cpk # % confidence interval from Cpk = #, n = #": {answer: referenceCpkInterval},
	"one-sided capability (LSL only)":                 {answer: referenceOneSided},
	"overall (long-term) capability Pp/Ppk with confidence intervals, Cpm, expected ppm under normality": {answer: referenceOverall},
	"Cp/Cpk (within-subgroup sigma, four estimators) and Pp/Ppk (overall sigma)": {answer: referenceSubgroups, skip: map[string]string{
		"within_pooled_c4": "the within sigma is within_pooled",
		"within_sbar_c4":   "the within sigma is within_pooled",
		"within_rbar_d2":   "the within sigma is within_pooled",
	}},
	"Ppk from a right-censored normal fit (values clamped at compliance), LSL only": {answer: referenceCensoredPpk},
	"binomial proportion, # % intervals": {answer: referenceProportion, skip: map[string]string{
		"wilson_continuity": "Wilson's interval is without continuity correction",
	}},
}

// referenceWafermap are the methods that package wafermap answers in a driver of
// its own.
var referenceWafermap = []string{
	"Moran's I and Geary's C, rook neighbours",
	"Moran's I and Geary's C, queen neighbours",
	"join-count statistics BB, WW, BW, rook neighbours, non-free sampling (without replacement)",
	"join-count statistics BB, WW, BW, queen neighbours, non-free sampling (without replacement)",
	"connected-component labelling, #-connectivity",
	"DBSCAN on coordinates of failing dies (Euclidean)",
	"Zernike polynomials, Noll ordering and normalisation, evaluated at points",
	"least-squares Zernike coefficients on a masked die grid",
}

func referenceStRD(c *referenceCase) map[string]any {
	y := c.list("y")
	m := stats.MomentsOf(y)
	return map[string]any{"n": m.N, "mean": m.Mean, "sd": m.SD(), "lag1": stats.Lag1(y)}
}

func referenceDescribe(c *referenceCase) map[string]any {
	x, probs := c.list("x"), c.list("probs")
	d, m := stats.Describe(x, probs), stats.MomentsOf(x)
	ci := stats.MeanInterval(x, 0.95)
	quartiles := stats.Quantiles(x, []float64{0.25, 0.75}, stats.HyndmanFan7)
	return map[string]any{
		"n": d.N, "mean": d.Mean, "sd": d.SD, "var": m.Variance(), "min": d.Min, "max": d.Max,
		"median": d.Median, "mad_1_4826": d.MADSigma,
		"quantile_type7": stats.Quantiles(x, probs, stats.HyndmanFan7), "quantile_type8": d.Quantiles,
		"iqr_type7": quartiles[1] - quartiles[0], "mean_ci95_t": []float64{ci.Lower, ci.Upper},
		"g1": m.MomentSkewness(), "G1": d.Skewness, "g2_excess": m.MomentKurtosis(), "G2_excess": d.Kurtosis,
		"trimmed_mean_5": stats.TrimmedMean(x, 0.05), "trimmed_mean_10": stats.TrimmedMean(x, 0.1),
		"trimmed_mean_20": stats.TrimmedMean(x, 0.2), "hodges_lehmann": stats.HodgesLehmann(x),
	}
}

func referenceHuber(c *referenceCase) map[string]any {
	x, k := c.list("x"), c.number("k")
	mu, mad := stats.Huber(x, k)
	// The reference ends after 30 steps, at leak-n25 while its seventh digit still
	// moves; TestHuberProposal2 checks that the estimates themselves converge.
	mu2, s2 := stats.HuberProposal2Steps(x, k, 30)
	return map[string]any{"mu_fixed_mad": mu, "scale_mad": mad, "mu_proposal2": mu2, "s_proposal2": s2}
}

func referenceGeometric(c *referenceCase) map[string]any {
	mean, sd := stats.Geometric(c.list("x"))
	return map[string]any{"geo_mean": mean, "geo_sd": sd}
}

func indices(i capability.Index) map[string]any {
	return map[string]any{"cp": i.Cp, "cpl": i.Cpl, "cpu": i.Cpu, "cpk": i.Cpk, "k": i.K}
}

func referenceIndices(c *referenceCase) map[string]any {
	return indices(capability.Indices(c.number("mean"), c.number("sd"), c.number("lsl"), c.number("usl")))
}

func referenceCpkInterval(c *referenceCase) map[string]any {
	n := c.number("n")
	iv := capability.CpkInterval(c.number("cpk"), n, n-1, c.number("confidence"))
	return map[string]any{"cpk_ci95": []float64{iv.Lower, iv.Upper}}
}

func compute(c *referenceCase) (capability.Result, stats.Moments) {
	x := c.list("x")
	return capability.Compute(capability.Input{Values: x, Lower: c.number("lsl"), Upper: c.number("usl"),
		MinimumN: 30, Confidence: 0.95}), stats.MomentsOf(x)
}

func referenceOneSided(c *referenceCase) map[string]any {
	r, m := compute(c)
	below, _ := capability.Outside(m.Mean, m.SD(), c.number("lsl"), c.number("usl"))
	return map[string]any{"cpl": r.Ppk.Estimate, "cpk": r.Ppk.Estimate, "cpk_ci95": []float64{r.Ppk.Lower, r.Ppk.Upper},
		"cpl_lower95_exact": capability.OneSidedLowerBound(r.Ppk.Estimate, r.N, c.number("confidence")), "ppm_below": 1e6 * below}
}

func referenceOverall(c *referenceCase) map[string]any {
	r, m := compute(c)
	lsl, usl := c.number("lsl"), c.number("usl")
	i := capability.Indices(m.Mean, m.SD(), lsl, usl)
	below, above := capability.Outside(m.Mean, m.SD(), lsl, usl)
	out := 0
	for _, v := range c.list("x") {
		if v < lsl || v > usl {
			out++
		}
	}
	n := float64(r.N)
	return map[string]any{
		"mean": m.Mean, "sd": r.Overall, "pp": r.Pp.Estimate, "ppl": i.Cpl, "ppu": i.Cpu, "ppk": r.Ppk.Estimate,
		"pp_ci95": []float64{r.Pp.Lower, r.Pp.Upper}, "ppk_ci95": []float64{r.Ppk.Lower, r.Ppk.Upper},
		"ppk_lower95_one_sided": capability.CpkLowerBound(r.Ppk.Estimate, n, n-1, 0.95),
		"cpm":                   capability.Cpm(m.Mean, m.SD(), r.N, lsl, usl, c.number("target")),
		"ppm_below":             1e6 * below, "ppm_above": 1e6 * above, "ppm_total": 1e6 * (below + above),
		"yield_sigma_level": -distuv.UnitNormal.Quantile(below + above), "observed_out": out,
	}
}

func referenceSubgroups(c *referenceCase) map[string]any {
	in := capability.Input{Lower: c.number("lsl"), Upper: c.number("usl"), MinimumN: 2, Confidence: 0.95}
	for g, row := range c.Inputs["subgroups"].([]any) {
		for _, v := range row.([]any) {
			in.Values = append(in.Values, v.(float64))
			in.Group = append(in.Group, int32(g))
		}
	}
	r := capability.Compute(in)
	mean := stats.Mean(in.Values)
	within := indices(capability.Indices(mean, r.Within, in.Lower, in.Upper))
	within["sigma"], within["cp"], within["cpk"] = r.Within, r.Cp.Estimate, r.Cpk.Estimate
	overall := indices(capability.Indices(mean, r.Overall, in.Lower, in.Upper))
	overall["cp"], overall["cpk"] = r.Pp.Estimate, r.Ppk.Estimate
	return map[string]any{"mean": mean, "sd_overall": r.Overall, "within_pooled": within, "overall": overall}
}

func referenceCensoredPpk(c *referenceCase) map[string]any {
	x, marks, lsl := c.list("x"), c.marks("censored"), c.number("lsl")
	fit, _ := dist.FitNormal(x, marks)
	in := capability.Input{Values: x, Censor: marks, Lower: lsl, Upper: math.NaN(), MinimumN: 30, Confidence: 0.95}
	r := capability.Compute(in)
	in.Censor = nil
	ignoring := capability.Compute(in)
	in.Values = append([]float64{}, x...)
	for i, m := range marks {
		if m != 0 {
			in.Values[i] = math.NaN()
		}
	}
	dropped := capability.Compute(in)
	return map[string]any{"mu": fit.Mu, "sigma": r.Overall, "n_censored": fit.Right, "ppk": r.Ppk.Estimate,
		"ppm_below": 1e6 * fit.CDF(lsl), "naive_ppk_ignoring_clamp": ignoring.Ppk.Estimate, "naive_drop_clamped_ppk": dropped.Ppk.Estimate}
}

func referenceProportion(c *referenceCase) map[string]any {
	k, n, conf := int(c.number("k")), int(c.number("n")), c.number("confidence")
	w, e, a := yield.Wilson(k, n, conf), yield.ClopperPearson(k, n, conf), yield.AgrestiCoull(k, n, conf)
	limits := func(iv stats.Interval) []float64 { return []float64{iv.Lower, iv.Upper} }
	return map[string]any{"estimate": w.Estimate, "wilson": limits(w), "clopper_pearson": limits(e), "agresti_coull": limits(a),
		"upper95_one_sided_clopper_pearson": yield.UpperBound(k, n, 0.95)}
}
