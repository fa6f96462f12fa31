package causes

import (
	"fmt"
	"math"
	"strings"
)

// rivalReason says in which view the likeliest other cause does better.
func (v *Verdict) rivalReason(g *Judged) []Reason {
	var rival *Judged
	for i := range v.Causes {
		o := &v.Causes[i]
		if o.single != nil && o.entry != g.entry && (rival == nil || o.Probability > rival.Probability) {
			rival = o
		}
	}
	if rival == nil || rival.Probability <= g.Probability {
		return nil
	}
	worst, at := 0.0, -1
	for i := range g.single.views {
		if d := v.weigh.View[i] * (g.single.views[i] - rival.single.views[i]); d < worst {
			worst, at = d, i
		}
	}
	if at < 0 {
		return nil
	}
	text := fmt.Sprintf("%s fit %s better", viewText[at], rival.Cause)
	if test := v.j.telling(g.see, rival.see); at <= zoneView && test >= 0 {
		text += fmt.Sprintf("; %s tells the two apart most", v.j.e.cols.Tests[test].Name)
	}
	return []Reason{{LogOdds: worst, Text: text}}
}

var viewText = [numViews]string{"the typical wafer's levels", "levels of single wafers", "levels inside the wafers", "the classes of the dice that stand alone",
	"the maps of the dice that stand alone", "sites, retests, order and pile-ups", "the yield"}

// telling is the test on which two causes' directions differ most; -1 when either
// moves none.
func (j *judged) telling(a, b *seen) int {
	if a == nil || b == nil || len(a.v.moves) == 0 || len(b.v.moves) == 0 {
		return -1
	}
	unit := func(m []float64) []float64 {
		out := make([]float64, len(m))
		for i := range m {
			out[i] = m[i] / j.f.wafer[i]
		}
		n := norm(out)
		for i := range out {
			out[i] /= n
		}
		return out
	}
	x, y := unit(a.v.moves[len(a.v.moves)/2]), unit(b.v.moves[len(b.v.moves)/2])
	best, at := 0.0, -1
	for i := range x {
		if d := math.Abs(x[i] - y[i]); d > best {
			best, at = d, j.f.tests[i]
		}
	}
	return at
}

// reasonsOfNone are those of within-baseline and unexplained, view by view, against
// the likeliest other hypothesis.
func (v *Verdict) reasonsOfNone(unknown bool) []Reason {
	j, w := v.j, &v.weigh
	var own, other *hypothesis
	for _, h := range j.all {
		switch {
		case h.unknown == unknown && len(h.causes) == 0:
			own = h
		case len(h.causes) == 1 && (other == nil || h.score(w) > other.score(w)):
			other = h
		}
	}
	if own == nil || other == nil {
		return nil
	}
	name := j.k.Causes[other.causes[0]].Cause
	text := [numViews]string{
		lotView:   "the typical wafer: " + j.largest(j.s.lot, j.f.lot),
		waferView: "wafers against one another: " + j.farthestWafer(),
		zoneView:  "levels inside the wafers",
		diceView:  fmt.Sprintf("dice that stand alone: %.0f, of which %.0f beyond healthy lots", sumOf(j.e.single(j.dice.classes)), j.dice.sum),
		mapView:   "maps of the dice that stand alone: " + j.mainPatterns(),
		flagView:  "flags of the tester: " + j.raisedFlags(),
		lossView:  j.lossReason(nil, 0).Text,
	}
	var out []Reason
	for i := range text {
		if i == lotView && !j.s.hasLot {
			continue
		}
		out = append(out, Reason{LogOdds: w.View[i] * (own.views[i] - other.views[i]), Text: text[i] + " (against " + name + ")"})
	}
	return out
}

func (j *judged) farthestWafer() string {
	best, at, test := 0.0, -1, 0
	for w, y := range j.s.wafers {
		for i := range y {
			if z := math.Abs(y[i] / j.f.wafer[i]); z > best {
				best, at, test = z, w, i
			}
		}
	}
	if at < 0 {
		return "no levels"
	}
	return fmt.Sprintf("the farthest off is %s of wafer %s with %+.1f sigma", j.e.cols.Tests[j.f.tests[test]].Name, j.e.Wafers[at].ID, j.s.wafers[at][test]/j.f.wafer[test])
}

func (j *judged) mainPatterns() string {
	var names []string
	for g := range groups {
		best, at := 0.0, -1
		for p, s := range j.maps.share[g] {
			if s > best {
				best, at = s, p
			}
		}
		if at >= 0 && j.maps.strength[g] > 0 {
			names = append(names, groupText[groups[g].name]+" mostly "+patterns[at])
		}
	}
	if len(names) == 0 {
		return "too few for one"
	}
	return strings.Join(names, ", ")
}

func (j *judged) raisedFlags() string {
	var names []string
	for _, f := range j.k.Flags {
		if j.e.Flags[f.Flag] {
			names = append(names, f.Text)
		}
	}
	if len(names) == 0 {
		return "none is raised"
	}
	return strings.Join(names, ", ")
}
