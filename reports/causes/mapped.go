package causes

import (
	"context"
	"math"
	"slices"
	"sort"

	"kneepoint/wafermap"
)

// groups are the classes whose dice are looked at together on a map.
var groups = []struct {
	name    string
	classes []string
}{
	{"hard", []string{"short", "emitter-short", "wreck"}},
	{"open", []string{"open", "resistive"}},
	{"pipe", []string{"pipe"}},
	{"edge-low", []string{"edge-low"}},
	{"leaky", []string{"leaky"}},
	{"single", []string{"gain", "single"}},
}

// leastMapped is the fewest dice of a group whose map is judged.
const leastMapped = 6

// group returns the index in groups of a class, -1 for none.
func (k *Catalogue) group(class int8) int {
	if class < 0 {
		return -1
	}
	for g := range groups {
		if slices.Contains(groups[g].classes, k.Classes[class].Class) {
			return g
		}
	}
	return -1
}

// mapped is how many wafers of a group have their maps judged: those with most of
// its dice. The stack of all wafers is judged beside them.
const mappedWafers = 8

// healthyGroup is about how large a part of a healthy lot's loss lies in a group.
// Common practice, no source.
var healthyGroup = map[string]float64{"hard": 0.7, "open": 0.1, "pipe": 0.1, "edge-low": 0.05, "leaky": 0.25, "single": 0.15}

// findPatterns judges the maps of single dice, by group, on the wafers that have
// most of them.
func (o *observer) findPatterns(ctx context.Context) error {
	c := o.c
	if c.X == nil || c.Y == nil {
		return nil
	}
	of := o.groupOf()
	type job struct{ g, w int }
	var jobs []job
	for g := range groups {
		counts := make([]int, len(c.Wafers))
		var order []int
		beyond := 0 // wafers with more than healthy ones have
		for w, s := range c.Wafers {
			for _, k := range o.e.class[s.Lo:s.Hi] {
				if k >= 0 && of[k] == g {
					counts[w]++
				}
			}
			usual := o.e.healthyLoss() * healthyGroup[groups[g].name] * float64(s.Hi-s.Lo)
			if counts[w] >= leastMapped {
				order = append(order, w)
				if n := float64(counts[w]); n > 1.2*usual+2*math.Sqrt(usual) {
					beyond++
				}
			}
		}
		sort.SliceStable(order, func(a, b int) bool { return counts[order[a]] > counts[order[b]] })
		for _, w := range order[:min(len(order), max(2, min(beyond, mappedWafers)))] {
			jobs = append(jobs, job{g, w})
		}
	}
	found := make([][]Pattern, len(jobs))
	err := each(ctx, len(jobs), func(i int) { found[i] = o.patterns(jobs[i].w, jobs[i].g, of) })
	for i, j := range jobs {
		o.e.Wafers[j.w].Patterns = append(o.e.Wafers[j.w].Patterns, found[i]...)
	}
	return err
}

// patterns are the map patterns of group g's dice on wafer w.
func (o *observer) patterns(w, g int, of []int) []Pattern {
	c, s := o.c, o.c.Wafers[w]
	fail := make([]bool, s.Hi-s.Lo)
	for i := range fail {
		k := o.e.class[s.Lo+i]
		fail[i] = k >= 0 && of[k] == g
	}
	in := wafermap.SignatureInput{Grid: wafermap.NewGrid(c.X[s.Lo:s.Hi], c.Y[s.Lo:s.Hi]), Geometry: c.Geometry, Fail: fail,
		ShotColumns: c.ShotColumns, ShotRows: c.ShotRows}
	if c.Site != nil {
		in.Site = c.Site[s.Lo:s.Hi]
	}
	if c.Order != nil {
		in.Order = c.Order[s.Lo:s.Hi]
	}
	return appendPatterns(nil, g, in)
}

func appendPatterns(out []Pattern, g int, in wafermap.SignatureInput) []Pattern {
	for _, p := range wafermap.Signatures(in) {
		out = append(out, Pattern{Group: groups[g].name, Kind: p.Kind, Loss: p.Loss, P: p.PValue, rows: p.Dice})
	}
	return out
}

// groupOf is the group of each class.
func (o *observer) groupOf() []int {
	of := make([]int, len(o.k.Classes))
	for k := range of {
		of[k] = o.k.group(int8(k))
	}
	return of
}

// stacked looks at all wafers laid on each other: a position counts as failing
// where more wafers have a single die of the group than chance places there. So a
// pattern of few dice a wafer shows as well.
func (o *observer) stacked() []Pattern {
	c := o.c
	if c.X == nil || c.Y == nil || len(c.Wafers) < 3 {
		return nil
	}
	of := o.groupOf()
	var out []Pattern
	for g := range groups {
		x, y, fail := o.stack(of, g)
		if fail == nil {
			continue
		}
		out = appendPatterns(out, g, wafermap.SignatureInput{Grid: wafermap.NewGrid(x, y), Geometry: c.Geometry, Fail: fail,
			ShotColumns: c.ShotColumns, ShotRows: c.ShotRows})
	}
	return out
}

func (o *observer) stack(of []int, g int) (x, y []int32, fail []bool) {
	c := o.c
	count := wafermap.NewStack()
	n := 0
	for _, s := range c.Wafers {
		hit := make([]bool, s.Hi-s.Lo)
		for i := s.Lo; i < s.Hi; i++ {
			if k := o.e.class[i]; k >= 0 && of[k] == g {
				hit[i-s.Lo] = true
				n++
			}
		}
		count.Add(c.X[s.Lo:s.Hi], c.Y[s.Lo:s.Hi], hit)
	}
	if n < 2*leastMapped || len(count.X) == 0 {
		return nil, nil, nil
	}
	var tested, failing int32
	for i := range count.X {
		tested, failing = tested+count.Tested[i], failing+count.Failing[i]
	}
	fail = make([]bool, len(count.X))
	for i := range fail {
		expected := float64(failing) / float64(tested) * float64(count.Tested[i])
		fail[i] = float64(count.Failing[i]) > expected+2.3*math.Sqrt(expected)+0.5
	}
	return count.X, count.Y, fail
}
