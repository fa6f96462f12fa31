package stats_test

import (
	"kneepoint/stats/variance"
)

// Answers for variance components, yield models, control charts, sequences and
// several variables.
func init() {
	for name, m := range map[string]referenceMethod{
		"nested random-effects variance components lot / wafer(lot) / die by REML and by ML":              {answer: referenceREML},
		"nested random-effects variance components by ANOVA (method of moments, unbalanced coefficients)": {answer: referenceNestedANOVA},
	} {
		referenceMethods[name] = m
	}
}

// codes reads an array of whole numbers.
func (c *referenceCase) codes(key string) []int32 {
	out := []int32{}
	for _, v := range c.list(key) {
		out = append(out, int32(v))
	}
	return out
}

func (c *referenceCase) nested() *variance.Design {
	return variance.New([]variance.Level{{Name: "lot", Code: c.codes("lot")}, {Name: "wafer", Code: c.codes("wafer")}}, c.list("y"))
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
