package wafermap

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"slices"
	"strings"
	"testing"
)

// The cases of testdata/reference come from R (spdep), SciPy, scikit-learn and
// NumPy, with the scripts that made them beside them; their README.md is the schema.
// KNEEPOINT_REFERENCE names another folder with cases of the same schema.

// statsGroups are the groups of cases that package stats checks.
var statsGroups = []string{"descriptive", "anova", "fits", "capability", "screening", "control", "yield", "timeseries", "multivariate", "mcd"}

type referenceCase struct {
	ID, Method, Source string
	Inputs             json.RawMessage
	Expected           any
	Tolerance          float64
	AbsTolerance       float64 `json:"abs_tolerance"`
	Tolerances         map[string]float64
}

// referenceMethod answers the cases whose method starts with prefix.
type referenceMethod struct {
	prefix string
	answer func(t *testing.T, c *referenceCase) map[string]any
}

var referenceMethods = []referenceMethod{
	{"Moran's I and Geary's C", referenceMoran},
	{"join-count statistics", referenceJoins},
	{"connected-component labelling", referenceLabels},
	{"DBSCAN on coordinates", referenceDensity},
	{"Zernike polynomials, Noll ordering", referenceZernike},
	{"least-squares Zernike", referenceZernikeFit},
}

// referencePending are methods of this room that are not built yet.
var referencePending = []string{}

func TestReference(t *testing.T) {
	folder := os.Getenv("KNEEPOINT_REFERENCE")
	if folder == "" {
		folder = filepath.Join("..", "testdata", "reference")
	}
	files, _ := filepath.Glob(filepath.Join(folder, "*.json"))
	if len(files) == 0 {
		t.Fatalf("no reference cases (*.json) in %s", folder)
	}
	passed, tried := map[string]int{}, map[string]int{}
	left, pending := 0, 0
	for _, file := range files {
		raw, err := os.ReadFile(file)
		if err != nil {
			t.Fatal(err)
		}
		var doc struct {
			Schema int
			Group  string
			Cases  []referenceCase
		}
		if err := json.Unmarshal(raw, &doc); err != nil || doc.Schema != 1 {
			t.Fatalf("%s: schema %d, %v", file, doc.Schema, err)
		}
		for _, c := range doc.Cases {
			k := slices.IndexFunc(referenceMethods, func(m referenceMethod) bool { return strings.HasPrefix(c.Method, m.prefix) })
			switch {
			case k >= 0:
				prefix := referenceMethods[k].prefix
				tried[prefix]++
				if t.Run(c.ID, func(t *testing.T) {
					c.compare(t, "", c.Expected, referenceMethods[k].answer(t, &c), c.Tolerance, 0)
				}) {
					passed[prefix]++
				}
			case slices.ContainsFunc(referencePending, func(p string) bool { return strings.HasPrefix(c.Method, p) }):
				pending++
			case slices.ContainsFunc(statsGroups, func(g string) bool { return strings.HasPrefix(doc.Group, g) }):
				left++
			default:
				t.Errorf("%s: nobody knows the method %q of group %q", c.ID, c.Method, doc.Group)
			}
		}
	}
	for _, m := range referenceMethods {
		t.Logf("%3d of %3d cases agree: %s", passed[m.prefix], tried[m.prefix], m.prefix)
	}
	t.Logf("%3d cases left to package stats, %d pending", left, pending)
	if len(tried) == 0 {
		t.Log("none of the cases are this package's")
	}
}

// compare checks every expected value, at any depth, against what was got. scale
// is the largest entry of the array the value stands in.
func (c *referenceCase) compare(t *testing.T, at string, expected, got any, tolerance, scale float64) {
	t.Helper()
	switch e := expected.(type) {
	case map[string]any:
		g, ok := got.(map[string]any)
		if !ok {
			t.Errorf("%s: got %T, want values by name", at, got)
			return
		}
		for name, v := range e {
			inner := tolerance
			if own, ok := c.Tolerances[name]; ok {
				inner = own
			}
			if _, ok := g[name]; !ok {
				t.Errorf("%s.%s is not computed", at, name)
				continue
			}
			c.compare(t, at+"."+name, v, g[name], inner, 0)
		}
	case []any:
		g := numbers(got)
		if rows, ok := got.([][]float64); ok {
			for i := range e {
				if i < len(rows) {
					c.compare(t, fmt.Sprintf("%s[%d]", at, i), e[i], rows[i], tolerance, scale)
				}
			}
			if len(rows) != len(e) {
				t.Errorf("%s: %d rows, want %d", at, len(rows), len(e))
			}
			return
		}
		if len(g) != len(e) {
			t.Errorf("%s: %d values, want %d", at, len(g), len(e))
			return
		}
		for _, v := range e {
			if f, ok := v.(float64); ok {
				scale = max(scale, math.Abs(f))
			}
		}
		for i := range e {
			c.compare(t, fmt.Sprintf("%s[%d]", at, i), e[i], g[i], tolerance, scale)
		}
	case nil:
		if g := numbers(got); len(g) != 1 || !math.IsNaN(g[0]) {
			t.Errorf("%s = %v, want none", at, got)
		}
	case float64:
		g := numbers(got)
		if len(g) != 1 || !(math.Abs(g[0]-e) <= c.AbsTolerance+tolerance*max(math.Abs(e), scale)) {
			t.Errorf("%s = %v, want %v", at, got, e)
		}
	default:
		if got != expected {
			t.Errorf("%s = %v, want %v", at, got, expected)
		}
	}
}

// numbers returns any number, or slice of numbers, as float64.
func numbers(v any) []float64 {
	switch v := v.(type) {
	case float64:
		return []float64{v}
	case int:
		return []float64{float64(v)}
	case []float64:
		return v
	case []int:
		out := make([]float64, len(v))
		for i := range v {
			out[i] = float64(v[i])
		}
		return out
	}
	return nil
}

func inputs[T any](t *testing.T, raw json.RawMessage) (in T) {
	t.Helper()
	if err := json.Unmarshal(raw, &in); err != nil {
		t.Fatal(err)
	}
	return in
}

func referenceNeighbours(t *testing.T, name string) Neighbours {
	t.Helper()
	switch name {
	case "rook":
		return Rook
	case "queen":
		return Queen
	}
	t.Fatalf("neighbours %q", name)
	return 0
}

func flags(v []int) []bool {
	out := make([]bool, len(v))
	for i := range v {
		out[i] = v[i] != 0
	}
	return out
}

func referenceMoran(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		X, Y       []int32
		Value      []float64
		Neighbours string
	}](t, c.Inputs)
	g, n := NewGrid(in.X, in.Y), referenceNeighbours(t, in.Neighbours)
	moran := func(m Moment) map[string]any {
		return map[string]any{"i": m.Value, "expectation": m.Expected, "variance": m.Variance, "z": m.Z, "p_two_sided": m.P}
	}
	geary := func(m Moment) map[string]any {
		return map[string]any{"c": m.Value, "expectation": m.Expected, "variance": m.Variance, "z_spdep": m.Z, "p_two_sided": m.P}
	}
	b, w := g.Autocorrelation(in.Value, n, Binary), g.Autocorrelation(in.Value, n, RowStandardised)
	return map[string]any{"n": b.N, "links_directed": b.Links,
		"moran_B_randomisation": moran(b.Moran), "moran_B_normality": moran(b.MoranNormality), "geary_B_randomisation": geary(b.Geary),
		"moran_W_randomisation": moran(w.Moran), "moran_W_normality": moran(w.MoranNormality), "geary_W_randomisation": geary(w.Geary)}
}

func referenceJoins(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		X, Y       []int32
		Fail       []int
		Neighbours string
	}](t, c.Inputs)
	jc := NewGrid(in.X, in.Y).JoinCount(flags(in.Fail), referenceNeighbours(t, in.Neighbours))
	row := func(count, expected, variance, z float64) map[string]any {
		return map[string]any{"count": count, "expectation": expected, "variance": variance, "z": z}
	}
	return map[string]any{"n": jc.N, "n_fail": jc.Fails, "joins": jc.Joins, "bb_p_greater": jc.PFFNormal, "ww_p_greater": jc.PPPNormal,
		"bb": row(jc.FailFail, jc.ExpectedFF, jc.VarianceFF, jc.ZFF),
		"ww": row(jc.PassPass, jc.ExpectedPP, jc.VariancePP, jc.ZPP),
		"bw": row(jc.PassFail, jc.ExpectedPF, jc.VariancePF, jc.ZPF)}
}

func referenceLabels(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		Rows, Cols int
		Fail       []int
	}](t, c.Inputs)
	n := Rook
	if strings.Contains(c.Method, "8-connectivity") {
		n = Queen
	}
	var x, y []int32
	for i := range in.Fail {
		x, y = append(x, int32(i%in.Cols)), append(y, int32(i/in.Cols))
	}
	g, fail := NewGrid(x, y), flags(in.Fail)
	labels, groups := g.Labels(fail, n)
	sizes, descending := make([]int, groups), []int{}
	out := make([]int, len(labels))
	for i, l := range labels {
		if out[i] = int(l); l > 0 {
			sizes[l-1]++
		}
	}
	largest := 0
	for _, cluster := range g.Clusters(fail, n, 1) {
		descending = append(descending, cluster.Dice)
		largest = max(largest, cluster.Dice)
	}
	return map[string]any{"n_components": groups, "labels": out, "sizes": sizes, "sizes_desc": descending, "largest": largest}
}

func referenceDensity(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		Points     [][2]int32 `json:"points_xy"`
		Eps        float64
		MinSamples int `json:"min_samples"`
	}](t, c.Inputs)
	var x, y []int32
	fail := make([]bool, len(in.Points))
	for i, p := range in.Points {
		x, y, fail[i] = append(x, p[0]), append(y, p[1]), true
	}
	d := NewGrid(x, y).DensityClusters(fail, in.Eps, 1, 1, in.MinSamples)
	want := c.Expected.(map[string]any)
	core := make([]int, len(fail))
	labels := make([]int, len(fail))
	for i := range fail {
		if labels[i] = int(d.Labels[i]); d.Core[i] {
			core[i] = 1
		}
	}
	// labels agree up to renumbering, and ambiguous border points may be in either of
	// their clusters: take the reference's label for both where they correspond
	theirs, ambiguous := want["labels"].([]any), map[int]bool{}
	for _, a := range want["ambiguous_border_points"].([]any) {
		ambiguous[int(a.(float64))] = true
	}
	rename, taken := map[int]int{-1: -1}, map[int]bool{}
	for i := range labels {
		their := int(theirs[i].(float64))
		if _, ok := rename[labels[i]]; !ok && !ambiguous[i] && !taken[their] {
			rename[labels[i]], taken[their] = their, true
		}
	}
	for i := range labels {
		if ambiguous[i] && labels[i] >= 0 {
			labels[i] = int(theirs[i].(float64))
		} else if r, ok := rename[labels[i]]; ok {
			labels[i] = r
		}
	}
	return map[string]any{"labels": labels, "n_clusters": d.Clusters, "n_noise": d.Noise, "core": core,
		"ambiguous_border_points": ambiguousPoints(in.Points, d, in.Eps)}
}

// ambiguousPoints lists the fails, no cores, within reach of cores of two clusters.
func ambiguousPoints(points [][2]int32, d Density, eps float64) []int {
	out := []int{}
	for i, p := range points {
		near := map[int32]bool{}
		for j, q := range points {
			if d.Core[j] && math.Hypot(float64(p[0]-q[0]), float64(p[1]-q[1])) <= eps {
				near[d.Labels[j]] = true
			}
		}
		if !d.Core[i] && len(near) > 1 {
			out = append(out, i)
		}
	}
	return out
}

func referenceZernike(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		Rho, Theta []float64
		J          []int
	}](t, c.Inputs)
	var n, m []int
	var values [][]float64
	for _, j := range in.J {
		nj, mj := Noll(j)
		n, m = append(n, nj), append(m, mj)
		row := make([]float64, len(in.Rho))
		for i := range row {
			row[i] = Zernike(j, in.Rho[i], in.Theta[i])
		}
		values = append(values, row)
	}
	return map[string]any{"n": n, "m": m, "values_by_j": values}
}

func referenceZernikeFit(t *testing.T, c *referenceCase) map[string]any {
	in := inputs[struct {
		Col, Row, Value []float64
		Centre, Radius  float64
		JMax            int `json:"j_max"`
	}](t, c.Inputs)
	x, y := make([]float64, len(in.Col)), make([]float64, len(in.Row))
	for i := range x {
		x[i], y[i] = in.Col[i]-in.Centre, in.Row[i]-in.Centre
	}
	f := FitZernike(x, y, in.Value, in.Radius, in.JMax)
	return map[string]any{"coefficients": f.Coefficients, "rss": f.RSS, "rms_residual": f.RMS, "r_squared": f.RSquared, "condition_number": f.Condition}
}
