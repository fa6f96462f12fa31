package causes

import (
	"math"
	"strings"
	"testing"
)

// Laws of probability hold these: what a view and its odds say together is the mean
// over the ways in which a cause can act.

func TestMixedIsTheMeanOverWays(t *testing.T) {
	d := diceTable{classes: 4, excess: []float64{30, 0, 0, 0}, sum: 30, strength: 12}
	p := []float64{0.04, 0.56, 0.4, 0}
	const one, blur = 0.6, 0.1
	view, odds := d.mixed(p, one, blur)
	w := UsualWeights().View[diceView]
	mean := (1 - one) * math.Exp(w*d.against(p, blur))
	for c := range 3 {
		q := []float64{0.15 * p[0], 0.15 * p[1], 0.15 * p[2], 0}
		q[c] += 0.85
		mean += one * p[c] * math.Exp(w*d.against(q, blur))
	}
	if got := w*view + odds; math.Abs(got-math.Log(mean)) > 1e-12 {
		t.Errorf("view and odds say %g, the mean %g", got, math.Log(mean))
	}
	if always, none := d.mixed(p, 0, blur); always != d.against(p, blur) || none != 0 {
		t.Errorf("without a lot of one class: %g, %g", always, none)
	}
	// Dice of one rare class alone speak more for a cause whose lots are of one class.
	if plain := w * d.against(p, blur); w*view+odds <= plain {
		t.Errorf("%g is not above %g", w*view+odds, plain)
	}
}

func TestShareIsTheMeanOverVariants(t *testing.T) {
	fit := func(lot float64, test int) *seen {
		return &seen{v: &variant{test: test}, lot: lot, wafers: math.Inf(-1), zones: math.Inf(-1)}
	}
	list := []*seen{fit(3, -1), fit(9, -1), fit(5, 0), fit(1, 1), fit(2, 2)}
	m := newMerits()
	var each []float64
	for _, x := range list {
		m.add(x)
		each = append(each, math.Exp(usualLevels(x.views())))
	}
	mean := ((each[0]+each[1])/2 + (each[2]+each[3]+each[4])/3) / 2 // a shift or one test read wrongly
	moves, share := m.share(0)
	if got := m.most + share; !moves || math.Abs(got-math.Log(mean)) > 1e-12 {
		t.Errorf("all variants say %g, their mean is %g", got, math.Log(mean))
	}
	const chance = 0.2
	moves, share = m.share(chance)
	both := math.Log(chance*mean + (1-chance)*math.Exp(usualLevels(still)))
	if got := m.most + share; !moves || math.Abs(got-both) > 1e-12 {
		t.Errorf("with a chance of %g they say %g, not %g", chance, got, both)
	}
	quiet := newMerits()
	quiet.add(fit(math.Inf(-1), -1))
	if moves, share := quiet.share(chance); moves || share > 0 {
		t.Errorf("a cause that moves nothing here: moves %v, %g", moves, share)
	}
}

func TestSmoothCountsOnlyWhereLevelsShow(t *testing.T) {
	for _, c := range []struct {
		name              string
		lot, wafers, zone float64
		want              float64
	}{
		{"nothing shows", 0, 0, 0, 0},
		{"varies over the wafer", 0, 0, 40, math.Log(2 * 0.8)},
		{"off and even", 12, 0, 1, math.Log(2 * 0.2)},
		{"some wafers, even", 0, 12, 1, math.Log(2 * 0.2)},
	} {
		x := &seen{lot: c.lot, wafers: c.wafers, zones: c.zone}
		if got := x.smooth(0.8); math.Abs(got-c.want) > 1e-12 {
			t.Errorf("%s: %g, not %g", c.name, got, c.want)
		}
	}
	even := smoothReason(&seen{lot: 12}, &Entry{Smooth: 0.8}, 0.5)
	if len(even) != 1 || !strings.Contains(even[0].Text, "alike all over the wafer") || math.Abs(even[0].LogOdds-0.5*math.Log(0.4)) > 1e-12 {
		t.Errorf("said of even levels: %+v", even)
	}
	var none *seen
	if none.smooth(0.8) != 0 || (&seen{lot: 12}).smooth(0) != 0 {
		t.Error("a cause that moves nothing, or of which nothing is known, counts")
	}
}

func TestCatalogueRefusesChancesOutOfRange(t *testing.T) {
	for key, value := range map[string]float64{"one-class": 1, "levels": -0.1, "smooth": 1.5} {
		_, err := Default().With([]map[string]any{{"cause": "ours", "dice": map[string]any{"leaky": 1.0}, key: value}})
		if err == nil || !strings.Contains(err.Error(), key) {
			t.Errorf("%s %g: %v", key, value, err)
		}
	}
}
