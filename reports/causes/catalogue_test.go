package causes

import (
	"slices"
	"strings"
	"testing"
)

// The causes of the design's table, in its order.
var designed = []string{"epi-thickness", "epi-doping", "base-profile", "emitter-depth", "emitter-efficiency", "edge-field", "surface-charge",
	"lifetime", "emitter-collector-pipe", "series-resistance", "handling-damage", "edge-dice", "shot-repeat", "probe-contact", "test-setup", "random-defects"}

func TestCatalogueHoldsTheDesign(t *testing.T) {
	k := Default()
	var names []string
	for _, e := range k.Causes {
		names = append(names, e.Cause)
		if len(e.Checks) == 0 || e.Text == "" {
			t.Errorf("%s says nothing of what it is or how to confirm it", e.Cause)
		}
		for _, c := range e.Checks {
			if !(c.Power > 0 && c.Power < 1) || !slices.Contains([]string{"", "acid", "voltage", "chemical"}, c.Caution) {
				t.Errorf("%s: check %+v", e.Cause, c)
			}
		}
	}
	if !slices.Equal(names, designed) {
		t.Errorf("causes are %v, the design has %v", names, designed)
	}
	for _, c := range k.Classes {
		for measures, p := range c.States {
			sum := 0.0
			for _, x := range p {
				sum += x
			}
			if sum < 0.999 || sum > 1.001 {
				t.Errorf("chances of %s for %s sum to %g", c.Class, measures, sum)
			}
		}
		if k.group(int8(slices.IndexFunc(k.Classes, func(o Class) bool { return o.Class == c.Class }))) < 0 {
			t.Errorf("class %s is in no group of maps", c.Class)
		}
	}
}

func TestSiteCauses(t *testing.T) {
	good := map[string]any{"cause": "wet-bench", "text": "residue", "dice": map[string]any{"leaky": 1.0}, "maps": map[string]any{"edge-ring": 3.0}}
	k, err := Default().With([]map[string]any{good})
	if err != nil {
		t.Fatal(err)
	}
	if n := len(k.Causes); n != len(designed)+1 || k.Causes[n-1].Odds != 1 {
		t.Errorf("%d causes, the last with odds %g", n, k.Causes[n-1].Odds)
	}
	if len(Default().Causes) != len(designed) {
		t.Error("the built-in catalogue was changed")
	}
	instead, err := Default().With([]map[string]any{{"cause": "lifetime", "text": "ours", "odds": 3.0, "dice": map[string]any{"leaky": 1.0}}})
	if err != nil || len(instead.Causes) != len(designed) {
		t.Errorf("a cause of a built-in name must take its place: %d causes, %v", len(instead.Causes), err)
	}
	for want, bad := range map[string]map[string]any{
		"without a name":   {"text": "x"},
		"is taken":         {"cause": "unexplained", "dice": map[string]any{"leaky": 1.0}},
		"no class":         {"cause": "a", "dice": map[string]any{"leeky": 1.0}},
		"no parameter":     {"cause": "a", "shifts": []any{map[string]any{"parameters": map[string]any{"epi": 1.0}, "from": 0.1, "to": 1.0}}},
		"0 < from < to":    {"cause": "a", "shifts": []any{map[string]any{"parameters": map[string]any{"lifetime": 1.0}, "from": 1.0, "to": 0.5}}},
		"no map pattern":   {"cause": "a", "dice": map[string]any{"leaky": 1.0}, "maps": map[string]any{"rings": 1.0}},
		"no flag":          {"cause": "a", "flags": map[string]any{"site": 0.5}},
		"between 0 and 1":  {"cause": "a", "flags": map[string]any{"one-site": 1.5}},
		"none or two":      {"cause": "a", "directions": []any{"up"}, "dice": map[string]any{"leaky": 1.0}},
		"above 0":          {"cause": "a", "odds": -1.0, "dice": map[string]any{"leaky": 1.0}},
		"shows nowhere":    {"cause": "a"},
		"field color":      {"cause": "a", "color": "red"},
		"cannot unmarshal": {"cause": "a", "odds": "many"},
	} {
		_, err := Default().With([]map[string]any{bad})
		if err == nil || !strings.Contains(err.Error(), want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%v: got %v, want one line with %q", bad, err, want)
		}
	}
}
