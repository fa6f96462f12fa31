package causes

import (
	"fmt"
	"math"
	"slices"
	"sort"
	"strings"
)

// Reason is one observation that speaks for a cause (LogOdds above 0) or against it,
// in natural logs of odds against nothing being wrong. Those of within-baseline and
// unexplained are against the likeliest other hypothesis.
type Reason struct {
	Text    string
	LogOdds float64
	Test    string
	Wafers  []string
}

const (
	leastReason = 0.2 // log odds that are worth a sentence
	mostReasons = 6   // each way
)

// reasons lists what speaks for and against a cause, most first.
func (v *Verdict) reasons(g *Judged, a *attribution) (for_, against []Reason) {
	var all []Reason
	switch {
	case g.entry < 0:
		all = v.reasonsOfNone(g.Cause == Unknown)
	case g.single != nil:
		all = v.reasonsOf(g, a)
	}
	sort.SliceStable(all, func(i, k int) bool { return math.Abs(all[i].LogOdds) > math.Abs(all[k].LogOdds) })
	for _, r := range all {
		switch {
		case math.IsNaN(r.LogOdds):
		case r.LogOdds >= leastReason && len(for_) < mostReasons:
			for_ = append(for_, r)
		case r.LogOdds <= -leastReason && len(against) < mostReasons:
			against = append(against, r)
		}
	}
	return for_, against
}

func (v *Verdict) reasonsOf(g *Judged, a *attribution) []Reason {
	h, w := g.single, &v.weigh
	e := &v.j.k.Causes[g.entry]
	var all []Reason
	if g.see != nil && len(g.see.v.moves) > 0 {
		all = append(all, v.j.lotReasons(g.see, w.View[lotView]*h.views[lotView])...)
		all = append(all, v.j.waferReasons(g.see, a, w.View[waferView]*h.views[waferView])...)
		all = append(all, v.j.zoneReason(g.see, w.View[zoneView]*h.views[zoneView])...)
	}
	all = append(all, v.j.diceReasons(e, w.View[diceView]*h.views[diceView])...)
	all = append(all, v.j.mapReasons(e, w.View[mapView])...)
	all = append(all, v.j.flagReasons(e, w.View[flagView])...)
	all = append(all, smoothReason(g.see, e, w.View[flagView])...)
	all = append(all, v.j.lossReason(e, w.View[lossView]*h.views[lossView]))
	return append(all, v.rivalReason(g)...)
}

// lotReasons compare the typical wafer's levels with the move at its likeliest size.
func (j *judged) lotReasons(x *seen, total float64) []Reason {
	if !j.s.hasLot || len(x.bySize) == 0 {
		return nil
	}
	at := 0
	for i, v := range x.bySize {
		if v > x.bySize[at] {
			at = i
		}
	}
	if x.bySize[at] < 0 {
		// no size of the move fits the typical wafer at all: one sentence says it
		return []Reason{{LogOdds: total, Text: "the typical wafer's levels are not moved in this cause's direction: " + j.largest(j.s.lot, j.f.lot)}}
	}
	return j.perTest(j.s.lot, x.v.moves[at], j.f.lot, total, "the typical wafer", "the healthy level", nil)
}

// waferReasons compare the affected wafers with the typical one.
func (j *judged) waferReasons(x *seen, a *attribution, total float64) []Reason {
	if len(x.affected) != len(j.s.wafers) || len(j.s.wafers) < 3 || x.reversed {
		return nil
	}
	var apart []int
	for w, odds := range x.affected {
		if odds > 0 {
			apart = append(apart, w)
		}
	}
	if len(apart) == 0 {
		return []Reason{{LogOdds: total, Text: "no wafer stands apart from the typical one in this cause's direction"}}
	}
	mean := make([]float64, len(j.f.tests))
	for i := range mean {
		n := 0.0
		for _, w := range apart {
			if y := j.s.wafers[w][i]; !math.IsNaN(y) {
				mean[i] += y
				n++
			}
		}
		mean[i] /= n
	}
	best, at := math.Inf(-1), 0
	for i, d := range x.v.wafer {
		if p := d.at(mean); p > best {
			best, at = p, i
		}
	}
	who := "wafer " + j.e.Wafers[apart[0]].ID
	if len(apart) > 1 {
		who = fmt.Sprintf("%d wafers", len(apart))
	}
	return j.perTest(mean, x.v.moves[at], j.f.wafer, total, who, "the typical wafer", j.ids(apart))
}

// perTest shares a view's log odds among the tests, by the ratio of each test's own
// Gaussian densities about the move and about none.
func (j *judged) perTest(y, move, sigma []float64, total float64, who, beside string, wafers []string) []Reason {
	size := 0.0
	for i, m := range move {
		size += m * m / (sigma[i] * sigma[i])
	}
	size = math.Sqrt(size)
	own, sum := make([]float64, len(y)), 0.0
	for i, m := range move {
		if math.IsNaN(y[i]) {
			continue
		}
		s := math.Sqrt(sigma[i]*sigma[i]*(1+spillError*size*spillError*size) + moveError*m*moveError*m)
		z0, z1 := y[i]/sigma[i], (y[i]-m)/s
		own[i] = (z0*z0-z1*z1)/2 - math.Log(s/sigma[i])
		sum += own[i]
	}
	// the view's weight, and what is drawn in of very many sigmas
	scale := 0.3
	if sum*total > 0 {
		scale = min(1, total/sum)
	}
	var out []Reason
	for i, t := range j.f.tests {
		if math.IsNaN(y[i]) {
			continue
		}
		test := &j.e.cols.Tests[t]
		out = append(out, Reason{Test: test.Name, Wafers: wafers, LogOdds: own[i] * scale,
			Text: moveSentence(test.Name, y[i], move[i], sigma[i], who, beside)})
	}
	return out
}

// moveSentence says what a test did and what it should have done.
func moveSentence(test string, seen, expected, sigma float64, who, beside string) string {
	s := fmt.Sprintf("%s of %s reads %s %s (%+.1f sigma)", test, who, change(seen), beside, seen/sigma)
	still := math.Abs(seen) < 1.5*sigma
	switch {
	case math.Abs(expected) < 0.7*sigma && still:
		return s + ": still, as it should be"
	case math.Abs(expected) < 0.7*sigma:
		return s + ": this cause would leave it where it is"
	case still && math.Abs(expected) > 2*sigma:
		return s + fmt.Sprintf(": it should have moved and did not, to %s it (%+.1f sigma)", change(expected), expected/sigma)
	case seen*expected < 0 && !still:
		return s + fmt.Sprintf(": the other way than expected, %s it (%+.1f sigma)", change(expected), expected/sigma)
	}
	return s + fmt.Sprintf("; expected are %s it (%+.1f sigma)", change(expected), expected/sigma)
}

// change says a log ratio as a person does: "4.1 % above", "3.2 times".
func change(log float64) string {
	r := math.Exp(log)
	switch {
	case r >= 2:
		return fmt.Sprintf("%.3g times", r)
	case r < 0.5:
		return fmt.Sprintf("%.2g times", r)
	case r >= 1:
		return fmt.Sprintf("%.1f %% above", 100*(r-1))
	}
	return fmt.Sprintf("%.1f %% below", 100*(1-r))
}

// largest names the test that is farthest off.
func (j *judged) largest(y, sigma []float64) string {
	best, at := 0.0, -1
	for i := range y {
		if z := math.Abs(y[i] / sigma[i]); z > best {
			best, at = z, i
		}
	}
	if at < 0 {
		return "no test has a level"
	}
	return fmt.Sprintf("the farthest off is %s with %+.1f sigma", j.e.cols.Tests[j.f.tests[at]].Name, y[at]/sigma[at])
}

// zoneReason is what the levels inside wafers say.
func (j *judged) zoneReason(x *seen, total float64) []Reason {
	var list []int
	for w, r := range x.inZones {
		if r > 2 {
			list = append(list, w)
		}
	}
	if len(list) == 0 {
		return []Reason{{LogOdds: total, Text: "inside no wafer do levels vary in this cause's direction"}}
	}
	best, in, zone, test := 0.0, 0, 0, -1
	for _, w := range list {
		for z, y := range j.s.zones[w] {
			for i := range y {
				if s := math.Abs(y[i] / j.f.zone[i]); s > best && math.Abs(x.v.moves[len(x.v.moves)/2][i]) > j.f.zone[i] {
					best, in, zone, test = s, w, z, i
				}
			}
		}
	}
	text := fmt.Sprintf("inside %s levels vary from zone to zone in this cause's direction", plural(len(list), "wafer", "wafers"))
	if test >= 0 {
		text += fmt.Sprintf("; most %s on wafer %s, a zone of which reads %s the wafer", j.e.cols.Tests[j.f.tests[test]].Name, j.e.Wafers[in].ID, change(j.s.zones[in][zone][test]))
	}
	return []Reason{{LogOdds: total, Text: text, Wafers: j.ids(list)}}
}

// diceReasons say which dice stand alone and whether the cause makes such.
func (j *judged) diceReasons(e *Entry, total float64) []Reason {
	d := &j.dice
	counts := j.e.single(d.classes)
	chances := j.k.chances(e)
	if d.sum == 0 {
		if chances == nil {
			return nil
		}
		return []Reason{{LogOdds: total, Text: "no more dice stand alone than in healthy lots, and this cause makes such dice"}}
	}
	var named, other []string
	nNamed, nOther := 0.0, 0.0
	order := make([]int, d.classes)
	for c := range order {
		order[c] = c
	}
	sort.SliceStable(order, func(a, b int) bool { return d.excess[order[a]] > d.excess[order[b]] })
	for _, c := range order[:min(3, len(order))] {
		n := d.excess[c]
		if n < 0.05*d.sum {
			continue
		}
		text := fmt.Sprintf("%s (%.0f, of which %.0f beyond healthy lots)", j.k.Classes[c].Text, counts[c], n)
		if chances != nil && chances[c] > supported {
			named, nNamed = append(named, text), nNamed+n
		} else {
			other, nOther = append(other, text), nOther+n
		}
	}
	switch {
	case total >= 0 && nNamed > 0:
		return []Reason{{LogOdds: total, Text: "dice that stand alone are of kinds that this cause makes: " + strings.Join(named, ", ")}}
	case total < 0 && nOther > 0:
		return []Reason{{LogOdds: total, Text: "dice stand alone that this cause seldom makes: " + strings.Join(other, ", ")}}
	case total < 0:
		return []Reason{{LogOdds: total, Text: fmt.Sprintf("of the dice that stand alone too few are of its kinds: %.0f beyond healthy lots, %.2g %% of all dice", d.sum, 100*d.share)}}
	}
	return nil
}

// mapReasons say in which patterns the single dice lie.
func (j *judged) mapReasons(e *Entry, weight float64) []Reason {
	d := &j.dice
	chances := j.k.chances(e)
	if chances == nil || d.sum == 0 || len(e.Maps) == 0 {
		return nil
	}
	total := totalOf(e.Maps)
	var out []Reason
	for g := range groups {
		in := 0.0
		for c := range chances {
			if j.k.group(int8(c)) == g && chances[c] > supported {
				in += d.excess[c] / d.sum
			}
		}
		for p, share := range j.maps.share[g] {
			if share <= 0 || in == 0 {
				continue
			}
			const blur = 0.06
			chance := (1-blur)*e.Maps[patterns[p]]/total + blur/float64(len(patterns))
			wafers, n := j.withPattern(groups[g].name, patterns[p])
			r := Reason{LogOdds: weight * in * j.maps.strength[g] * share * math.Log(chance*float64(len(patterns))), Wafers: wafers}
			r.Text = fmt.Sprintf("%.0f %% of the %s dice lie in the pattern %s", 100*share, groupText[groups[g].name], patterns[p])
			if n > 0 {
				r.Text += fmt.Sprintf(", on %s", plural(n, "wafer", "wafers"))
			}
			if r.LogOdds < 0 {
				r.Text += "; this cause seldom makes it"
			} else {
				r.Text += ", as this cause makes them"
			}
			out = append(out, r)
		}
	}
	return out
}

// groupText names the dice of a group.
var groupText = map[string]string{"hard": "shorted or wrecked", "open": "open or resistive", "pipe": "piped", "edge-low": "low-BVcbo",
	"leaky": "leaky", "single": "otherwise single"}

func (j *judged) withPattern(group, kind string) (ids []string, n int) {
	for w := range j.e.Wafers {
		if slices.ContainsFunc(j.e.Wafers[w].Patterns, func(p Pattern) bool { return p.Group == group && p.Kind == kind }) {
			ids = append(ids, j.e.Wafers[w].ID)
		}
	}
	return ids, len(ids)
}

// flagReasons are the yes-or-no observations on which the cause has a say.
func (j *judged) flagReasons(e *Entry, weight float64) []Reason {
	var out []Reason
	for _, f := range j.k.Flags {
		raised, known := j.e.Flags[f.Flag]
		p, named := e.Flags[f.Flag]
		if !known || !named {
			continue
		}
		r := Reason{LogOdds: weight * math.Log(p/f.Usual), Text: fmt.Sprintf("%s: so with this cause in %.0f %% of lots, else in %.2g %%", f.Text, 100*p, 100*f.Usual)}
		if !raised {
			r.LogOdds = weight * math.Log((1-p)/(1-f.Usual))
			r.Text = fmt.Sprintf("not seen: %s, as with this cause in %.0f %% of lots", f.Text, 100*p)
		}
		out = append(out, r)
	}
	return out
}

// smoothReason says whether the levels vary over the wafer as they do with the cause.
func smoothReason(x *seen, e *Entry, weight float64) []Reason {
	v := x.smooth(e.Smooth)
	switch {
	case v == 0:
		return nil
	case x.zones > varies:
		return []Reason{{LogOdds: weight * v, Text: fmt.Sprintf("levels vary over the wafer, as with this cause in %.0f %% of lots", 100*e.Smooth)}}
	}
	return []Reason{{LogOdds: weight * v, Text: fmt.Sprintf("levels are off alike all over the wafer, as with this cause in %.0f %% of lots", 100*(1-e.Smooth))}}
}

// lossReason is about the yield; e is nil for the unknown.
func (j *judged) lossReason(e *Entry, total float64) Reason {
	loss, usual := 100*(1-j.e.yield()), 100*j.e.healthyLoss()
	text := fmt.Sprintf("%.1f %% of the dice fail, where healthy lots lose %.1f %%", loss, usual)
	if !(j.e.cols.BaselineYield > 0) {
		text = fmt.Sprintf("%.1f %% of the dice fail; what healthy lots lose is not known, %.0f %% is taken", loss, usual)
	}
	if j.e.Flags["fails-without-reason"] && (e == nil || !e.Setup) {
		text += "; part of these pass every limit, which nothing on the wafer makes them do"
	}
	return Reason{LogOdds: total, Text: text}
}

func (j *judged) ids(wafers []int) []string {
	out := make([]string, len(wafers))
	for i, w := range wafers {
		out[i] = j.e.Wafers[w].ID
	}
	return out
}

func plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return fmt.Sprintf("%d %s", n, many)
}

func sumOf(v []float64) float64 {
	s := 0.0
	for _, x := range v {
		s += x
	}
	return s
}
