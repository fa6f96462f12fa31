package ingest

import (
	"maps"
	"slices"
	"strings"

	"kneepoint/config"
)

// Geometry is what a file says about the wafers themselves; zero where it says
// nothing. The product file's geometry comes first.
type Geometry struct {
	DiameterMM, DieWidthMM, DieHeightMM float64
	Notch                               string // where flat or notch is: up, down, left, right
	XGrows, YGrows                      string // right or left, up or down
	CentreX, CentreY                    int32  // die index of the centre die, Missing
}

// Known says whether the file gives anything.
func (g Geometry) Known() bool {
	return g != Geometry{CentreX: Missing, CentreY: Missing} && g != Geometry{}
}

// lotFacts are facts of a lot that its rows do not hold.
type lotFacts struct {
	geometry             Geometry
	attributes           map[string]string // of the lot, as a file of convert has them under names of roles
	hardNames, softNames map[int]string
}

// add takes what an earlier file did not say.
func (a *lotFacts) add(b *lotFacts) {
	if !a.geometry.Known() {
		a.geometry = b.geometry
	}
	for k, v := range b.attributes {
		if a.attributes == nil {
			a.attributes = map[string]string{}
		}
		if _, ok := a.attributes[k]; !ok {
			a.attributes[k] = v
		}
	}
	fill := func(to *map[int]string, from map[int]string) {
		for k, v := range from {
			if *to == nil {
				*to = map[int]string{}
			}
			if (*to)[k] == "" {
				(*to)[k] = v
			}
		}
	}
	fill(&a.hardNames, b.hardNames)
	fill(&a.softNames, b.softNames)
}

// Geometry is what the file says of the wafers' size, die size and orientation.
func (l *Lot) Geometry() Geometry { return l.about.geometry }

// HardBinNames are the names that the file gives hard bins; empty when none.
func (l *Lot) HardBinNames() map[int]string { return maps.Clone(l.about.hardNames) }

// SoftBinNames are those of soft bins.
func (l *Lot) SoftBinNames() map[int]string { return maps.Clone(l.about.softNames) }

// level says what a text column belongs to, where that is known and not judged
// by its content.
type level uint8

const (
	levelJudged level = iota
	levelWafer
	levelDie
)

// ownFact is what a file of convert says of a test beyond what others say.
type ownFact struct {
	measures, limitsFrom string
	clamp, floor         float64 // SI; NaN where none or found as a pile-up
	units                []config.Unit
}

// fromOwn takes it over.
func (i *testInfo) fromOwn(o *ownFact) {
	i.files++
	if o == nil {
		return
	}
	i.cleaned++
	i.declared = true
	if i.measures == "" {
		i.measures = o.measures
	}
	if i.limitsFrom == "data file" && o.limitsFrom != "" && i.files == 1 {
		i.limitsFrom = o.limitsFrom
	}
	if i.clamp != i.clamp {
		i.clamp = o.clamp
	}
	if i.floor != i.floor {
		i.floor = o.floor
	}
}

// addUnits notes in which units values stood in files.
func (i *testInfo) addUnits(c said, unit config.Unit) {
	units := []config.Unit{unit}
	if c.own != nil && len(c.own.units) > 0 {
		units = c.own.units
	}
	for _, u := range units {
		if !slices.ContainsFunc(i.fileUnits, func(v config.Unit) bool { return v.Exp == u.Exp }) {
			i.fileUnits = append(i.fileUnits, u)
		}
	}
}

// piles says whose clamp and floor were found in the data.
func (d *draft) piles() [][2]bool {
	p := make([][2]bool, len(d.tests))
	for i := range d.tests {
		p[i] = d.tests[i].pile
	}
	return p
}

// foundAgain are the codes of findings that reading a file of convert makes
// anew, from the values that it holds. Findings of other codes are about what is
// no longer in such a file, as sentinels and unreadable cells, and are carried in
// its metadata.
var foundAgain = set("retest", "retest-empty", "retest-best", "no-coordinates", "die-without-coordinates", "off-wafer", "wafer-turned", "map-gaps", "unit-factor",
	"missing", "clamped", "at-floor", "above-clamp", "one-value", "test-not-in-data", "limits-differ")

// cellCodes are those of numbers, by test.
var cellCodes = set("unreadable-value", "not-finite", "out-of-range", "missing-word", "invalid-result", "sentinel", "over-range")

// carriedLater says whether a carried finding has a place after the description
// of the tests.
func (d *draft) carriedLater(f Finding) bool {
	return cellCodes[f.Code] || f.Code == "duplicate-row" || f.Code == "joined-rows" || f.Code == "partial-retest" || f.Code == "untested"
}

// takeCarried takes the carried findings out that are wanted.
func (d *draft) takeCarried(want func(Finding) bool) []Finding {
	var out, rest []Finding
	for _, f := range d.carried {
		if want(f) {
			out = append(out, f)
		} else {
			rest = append(rest, f)
		}
	}
	d.carried = rest
	return out
}

// carriedOf gives the carried findings about the cells of a test. Several tests
// are asked at once, so that nothing is taken out.
func (d *draft) carriedOf(test int) []Finding {
	var out []Finding
	for _, f := range d.carried {
		if cellCodes[f.Code] && d.testIn(f.Text) == test {
			out = append(out, f)
		}
	}
	return out
}

// testIn finds the test that a finding is about by its text, the one with the
// longest name; the first when none is named.
func (d *draft) testIn(text string) int {
	best := 0
	for i := range d.tests {
		if strings.Contains(text, "test "+d.tests[i].name+": ") && (!strings.Contains(text, "test "+d.tests[best].name+": ") || len(d.tests[i].name) > len(d.tests[best].name)) {
			best = i
		}
	}
	return best
}
