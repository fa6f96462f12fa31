package stats_test

import (
	"encoding/json"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"testing"
)

// The cases of testdata/reference come from published certified values (NIST
// StRD, NIST/SEMATECH e-Handbook) and from R and SciPy, with the scripts that
// made them beside them; their README.md is the schema. KNEEPOINT_REFERENCE
// names another folder with cases of the same schema.
//
// A case is answered by the entry of referenceMethods for its method; see
// reference_methods_test.go, which also lists what belongs elsewhere.

// referenceCase is one case of the schema.
type referenceCase struct {
	ID, Method, Source string
	Inputs             map[string]any
	Expected           map[string]any
	Tolerance          float64
	AbsTolerance       float64 `json:"abs_tolerance"`
	Tolerances         map[string]float64
}

// referenceMethod answers a case with values by key.
type referenceMethod struct {
	answer func(c *referenceCase) map[string]any
	// skip names keys of a case, at any depth, that are another convention or not
	// built yet, and why.
	skip map[string]string
}

var numberInMethod = regexp.MustCompile(`[0-9]+(\.[0-9]+)?`)

// methodName is the method without its numbers, which the inputs carry too.
func methodName(s string) string { return numberInMethod.ReplaceAllString(s, "#") }

func TestReference(t *testing.T) {
	folder := os.Getenv("KNEEPOINT_REFERENCE")
	if folder == "" {
		folder = filepath.Join("..", "testdata", "reference")
	}
	files, _ := filepath.Glob(filepath.Join(folder, "*.json"))
	if len(files) == 0 {
		t.Fatalf("no reference cases (*.json) in %s", folder)
	}
	tally := map[string]*struct{ passed, tried int }{}
	skipped := map[string]int{} // "key: reason" -> cases
	elsewhere := 0
	for _, file := range files {
		for _, c := range readCases(t, file) {
			name := methodName(c.Method)
			m, known := referenceMethods[name]
			switch {
			case known:
				if tally[name] == nil {
					tally[name] = &struct{ passed, tried int }{}
				}
				tally[name].tried++
				if t.Run(c.ID, func(t *testing.T) { c.check(t, m, skipped) }) {
					tally[name].passed++
				}
			case slices.Contains(referenceWafermap, name):
				elsewhere++
			default:
				t.Errorf("%s: nobody knows the method %q", c.ID, c.Method)
			}
		}
	}
	for _, name := range sortedKeys(tally) {
		t.Logf("%3d of %3d cases agree: %s", tally[name].passed, tally[name].tried, name)
	}
	for _, k := range sortedKeys(skipped) {
		t.Logf("%3d cases, key not checked: %s", skipped[k], k)
	}
	t.Logf("%3d cases are wafermap's", elsewhere)
}

func readCases(t *testing.T, file string) []referenceCase {
	t.Helper()
	raw, err := os.ReadFile(file)
	if err != nil {
		t.Fatal(err)
	}
	var doc struct {
		Schema int
		Cases  []referenceCase
	}
	if err := json.Unmarshal(raw, &doc); err != nil || doc.Schema != 1 {
		t.Fatalf("%s: schema %d, %v", file, doc.Schema, err)
	}
	return doc.Cases
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}

// check compares every expected value, at any depth, with the answer.
func (c *referenceCase) check(t *testing.T, m referenceMethod, skipped map[string]int) {
	got := m.answer(c)
	used := 0
	var compare func(at string, expected, got any, tolerance, scale float64)
	compare = func(at string, expected, got any, tolerance, scale float64) {
		t.Helper()
		switch e := expected.(type) {
		case map[string]any:
			g, ok := got.(map[string]any)
			if !ok {
				t.Errorf("%s: got %T, want values by name", at, got)
				return
			}
			for _, name := range sortedKeys(e) {
				if why, ok := m.skip[name]; ok {
					skipped[name+": "+why]++
					continue
				}
				value, ok := g[name]
				if !ok {
					t.Errorf("%s%s is not computed", at, name)
					continue
				}
				inner := tolerance
				if own, ok := c.Tolerances[name]; ok {
					inner = own
				}
				compare(at+name+" ", e[name], value, inner, 0)
			}
		case []any:
			if rows, ok := got.([][]float64); ok && len(rows) == len(e) {
				for i := range e {
					compare(fmt.Sprintf("%s[%d]", at, i), e[i], rows[i], tolerance, 0)
				}
				return
			}
			g := asNumbers(got)
			if len(g) != len(e) {
				t.Errorf("%s: %d values, want %d", at, len(g), len(e))
				return
			}
			for _, v := range e {
				if f, ok := v.(float64); ok {
					scale = math.Max(scale, math.Abs(f))
				}
			}
			for i := range e {
				compare(fmt.Sprintf("%s[%d]", at, i), e[i], g[i], tolerance, scale)
			}
		case nil: // undefined: no number may come back
			used++
			if g := asNumbers(got); len(g) != 1 || !math.IsNaN(g[0]) {
				t.Errorf("%s= %v, want none", at, got)
			}
		case float64:
			used++
			g := asNumbers(got)
			if len(g) != 1 || !(math.Abs(g[0]-e) <= c.AbsTolerance+tolerance*math.Max(math.Abs(e), scale)) {
				t.Errorf("%s= %v, want %v (%s)", at, got, e, c.Source)
			}
		default:
			used++
			if got != expected {
				t.Errorf("%s= %v, want %v", at, got, expected)
			}
		}
	}
	compare("", any(c.Expected), any(got), c.Tolerance, 0)
	if used == 0 {
		t.Error("nothing of this case was checked")
	}
}

// asNumbers returns a number, or a slice of them, as float64.
func asNumbers(v any) []float64 {
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

// number reads a scalar input; null and absent are NaN.
func (c *referenceCase) number(key string) float64 {
	if v, ok := c.Inputs[key].(float64); ok {
		return v
	}
	return math.NaN()
}

// list reads an array input.
func (c *referenceCase) list(key string) []float64 {
	raw, _ := c.Inputs[key].([]any)
	out := make([]float64, len(raw))
	for i, v := range raw {
		out[i] = math.NaN()
		if f, ok := v.(float64); ok {
			out[i] = f
		}
	}
	return out
}

// marks reads an array of censoring marks.
func (c *referenceCase) marks(key string) []int8 {
	out := []int8{}
	for _, v := range c.list(key) {
		out = append(out, int8(v))
	}
	return out
}
