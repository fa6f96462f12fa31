package ingest

import (
	"fmt"
	"math"
	"slices"

	"kneepoint/config"
)

const (
	scaleSpread = 1.0  // decades between quartiles above which readings have no level to judge
	scaleBase   = 2.5  // decades off a baseline median that no process goes
	scaleLimit  = 2.5  // decades beyond a limit that readings should hold
	scaleBelow  = 5.0  // decades under an upper limit: far, as leakages have room below theirs
	scaleLeast  = 20   // readings
	scaleSample = 4000 // readings looked at: every so many, as a level needs no more
)

// scale finds readings that are in another prefix of their unit than was taken, by
// their level: nA against A is a factor of 1e9. Readings whose quartiles lie
// within a decade have a level; it is compared with the product's baseline
// median where there is one, else with the limits. A level further off than any
// process goes, by a factor within a third of a decade of a power of a thousand,
// is told as severe. The readings are left as they are: a file with a wrong unit
// needs a person.
//
// The distances are common practice, no source.
func (d *draft) scale(i int) []Finding {
	t := &d.tests[i]
	var logs []float64
	step := max(1, len(d.values[i])/scaleSample)
	for k := 0; k < len(d.values[i]); k += step {
		if v := d.values[i][k]; v != 0 && !math.IsNaN(v) {
			logs = append(logs, math.Log10(math.Abs(v)))
		}
	}
	if len(logs) < scaleLeast {
		return nil
	}
	slices.Sort(logs)
	level := logs[len(logs)/2]
	if logs[3*len(logs)/4]-logs[len(logs)/4] > scaleSpread {
		return nil
	}
	off, against := d.levelOff(t, level)
	power := 3 * math.Round(off/3)
	if power == 0 || math.Abs(off-power) > 1 {
		return nil
	}
	seems := ""
	if u, ok := withPrefix(t.unit, int(power)); ok {
		seems = fmt.Sprintf("; they seem to be in %s and were taken as %s", u, showUnit(t.unit))
	}
	return []Finding{{Code: "unit-factor", Severity: Severe, Dice: d.n,
		Text:   fmt.Sprintf("test %s: readings are about %s times %s, which no process does%s", t.name, factorText(power), against, seems),
		Remedy: "give the data's own unit in a unit row, or correct the unit in the product file"}}
}

// levelOff is how many decades a level is off what is expected, 0 when it is
// where it can be, and what it was compared with.
func (d *draft) levelOff(t *testInfo, level float64) (decades float64, against string) {
	if d.product != nil && d.product.Baseline != nil {
		if b, ok := d.product.Baseline.Tests[t.name]; ok && b.Median != 0 && !math.IsNaN(b.Median) {
			if off := level - math.Log10(math.Abs(b.Median)); math.Abs(off) >= scaleBase {
				return off, "the baseline's median"
			}
			return 0, ""
		}
	}
	low, high := math.Log10(math.Abs(t.lower)), math.Log10(math.Abs(t.upper))
	hasLow, hasHigh := t.lower == t.lower && t.lower != 0, t.upper == t.upper && t.upper != 0
	switch {
	case hasLow && hasHigh && level < low-scaleLimit:
		return level - low, "the lower limit"
	case hasHigh && level > high+scaleLimit:
		return level - high, "the upper limit"
	case hasLow && !hasHigh && math.Abs(level-low) > scaleLimit:
		return level - low, "the lower limit"
	case hasHigh && !hasLow && level < high-scaleBelow:
		return level - high, "the upper limit"
	}
	return 0, ""
}

// withPrefix names the unit in which a value reads 10^-power times as large.
func withPrefix(u config.Unit, power int) (string, bool) {
	prefixes := map[int]string{-15: "f", -12: "p", -9: "n", -6: "u", -3: "m", 0: "", 3: "k", 6: "M", 9: "G"}
	p, ok := prefixes[u.Exp-power]
	if !ok || !u.Given() || u.Base == "ratio" {
		return "", false
	}
	return p + u.Base, true
}

func factorText(power float64) string {
	if power < 0 {
		return fmt.Sprintf("1/1e%.0f", -power)
	}
	return fmt.Sprintf("1e%.0f", power)
}
