package build

import (
	"context"
	"fmt"
	"math"
	"strings"

	"kneepoint/reports"
	"kneepoint/wafermap"
)

const (
	stackedTests   = 3   // tests that are stacked, those that lose most
	repeatersShown = 100 // die positions
	repeatLevel    = 0.05
)

// mapsOfLot looks at the wafers' maps together: which are alike, what they have in
// common, and which die positions fail again and again.
func (w *lotwork) mapsOfLot(ctx context.Context) error {
	why := w.mapWhy()
	if why != "" {
		w.rep.GroupsWhy, w.rep.StacksWhy = why, why
	}
	if !w.lot.HasCoordinates() {
		for t := range w.rep.Tests {
			w.rep.Tests[t].SurfaceWhy = "the data have no die coordinates"
		}
		return nil
	}
	p := w.newPlaces()
	w.maps.places = p
	if err := w.surfaces(ctx, p); err != nil || why != "" {
		return err
	}
	wafers := w.lot.Wafers()
	if len(wafers) < 2 {
		w.rep.GroupsWhy, w.rep.StacksWhy = "the lot has one wafer", "the lot has one wafer"
		return nil
	}
	tasks := []func(){func() { w.repeaters(wafers2fails(w)) }, func() { w.groupWafers(wafers2fails(w)) }}
	if err := w.each(ctx, len(tasks), func(i int) { tasks[i]() }); err != nil {
		return err
	}
	return w.stacks(ctx, p)
}

// wafers2fails is the lot as the map functions take it.
func wafers2fails(w *lotwork) []wafermap.WaferFails {
	var out []wafermap.WaferFails
	for _, r := range w.lot.Wafers() {
		out = append(out, wafermap.WaferFails{X: w.lot.X()[r.Lo:r.Hi], Y: w.lot.Y()[r.Lo:r.Hi], Fail: w.fails(r.Lo, r.Hi)})
	}
	return out
}

// groupWafers sorts the wafers into groups of like maps.
func (w *lotwork) groupWafers(wafers []wafermap.WaferFails) {
	g := wafermap.GroupWafers(w.geo, wafers, w.maps.found)
	if w.rep.GroupsWhy = g.Why; g.Count < 2 {
		return
	}
	w.rep.Groups = make([]reports.Group, g.Count)
	passing := make([]int, g.Count)
	for i, k := range g.Group {
		if k < 0 {
			continue
		}
		r := &w.rep.Groups[k]
		w.rep.Wafers[i].Group = k + 1
		r.ID = k + 1
		r.Wafers = append(r.Wafers, w.rep.Wafers[i].ID)
		r.Dice += w.rep.Wafers[i].Dice
		passing[k] += w.rep.Wafers[i].Passing
	}
	for k := range w.rep.Groups {
		w.rep.Groups[k].Yield = share(passing[k], w.rep.Groups[k].Dice)
	}
}

// repeaters lists the die positions that fail on more wafers than chance allows.
func (w *lotwork) repeaters(wafers []wafermap.WaferFails) {
	list, _ := wafermap.Repeaters(w.geo, wafers, repeatLevel)
	w.rep.RepeatersAll = len(list)
	list = list[:min(len(list), repeatersShown)]
	at := map[[2]int32]int{}
	for i, r := range list {
		at[[2]int32{r.X, r.Y}] = i
		out := reports.Repeater{X: int(r.X), Y: int(r.Y), Tested: r.Tested, Failing: r.Failing, Expected: num(r.Expected), PValue: num(r.PValue), Adjusted: num(r.Adjusted), RadiusMM: reports.NaN}
		if w.inMM() {
			out.RadiusMM = num(w.geo.RadiusMM(r.X, r.Y))
		}
		w.rep.Repeaters = append(w.rep.Repeaters, out)
	}
	if len(list) == 0 {
		return
	}
	counts := make([][]int, len(list)) // by repeater and test: first fails
	for row, t := range w.first {
		if t < 0 {
			continue
		}
		i, ok := at[[2]int32{w.lot.X()[row], w.lot.Y()[row]}]
		if !ok {
			continue
		}
		if counts[i] == nil {
			counts[i] = make([]int, len(w.data))
		}
		counts[i][t]++
	}
	for i, c := range counts {
		if c != nil {
			w.rep.Repeaters[i].Main = w.lot.Tests()[fallingOrder(c)[0]].Name
		}
	}
}

// stacks lays the wafers on each other: all, each group, and all by the tests that
// lose most.
func (w *lotwork) stacks(ctx context.Context, p *places) error {
	all := make([]int, len(w.lot.Wafers()))
	for i := range all {
		all[i] = i
	}
	failing := func(row int) bool { return !w.pass[row] }
	tasks := []func(){func() {
		w.maps.all = w.stack(p, all, failing)
		w.rep.Signatures = w.patterns(p, w.maps.all, failing)
	}}
	add := func(r reports.Stack, wafers []int, fails func(row int) bool) {
		k := len(w.rep.Stacks)
		w.rep.Stacks = append(w.rep.Stacks, r)
		w.maps.stacks = append(w.maps.stacks, nil)
		tasks = append(tasks, func() {
			s := w.stack(p, wafers, fails)
			w.maps.stacks[k] = s
			out := &w.rep.Stacks[k]
			rate, _, positions := s.rate()
			out.Rate, out.Positions, out.Wafers = num(rate), positions, len(wafers)
			out.Signatures = w.patterns(p, s, fails)
		})
	}
	for _, g := range w.rep.Groups {
		var wafers []int
		for i := range w.rep.Wafers {
			if w.rep.Wafers[i].Group == g.ID {
				wafers = append(wafers, i)
			}
		}
		add(reports.Stack{Of: "group", Group: g.ID}, wafers, failing)
	}
	for _, t := range w.mostLosing() {
		add(reports.Stack{Of: "test", Test: w.lot.Tests()[t].Name}, all, w.failsTest(t))
	}
	if err := w.each(ctx, len(tasks), func(i int) { tasks[i]() }); err != nil {
		return err
	}
	w.describeGroups()
	return nil
}

// mostLosing are the tests with the largest first losses.
func (w *lotwork) mostLosing() []int {
	counts := make([]int, len(w.data))
	for t, l := range w.losses.Tests {
		counts[t] = l.First
	}
	var out []int
	for _, t := range fallingOrder(counts) {
		if counts[t] > 0 && len(out) < stackedTests {
			out = append(out, t)
		}
	}
	return out
}

// failsTest says whether a die's reading of a test is outside its limits.
func (w *lotwork) failsTest(t int) func(row int) bool {
	test, values, marks := w.lot.Tests()[t], w.lot.Values(t), w.lot.Censor(t)
	return func(row int) bool {
		var mark int8
		if marks != nil {
			mark = marks[row]
		}
		return outside(values[row], mark, test.Lower, test.Upper)
	}
}

// describeGroups says in words what each group is.
func (w *lotwork) describeGroups() {
	for k := range w.rep.Groups {
		g := &w.rep.Groups[k]
		passing, dice := 0.0, 0
		for _, o := range w.rep.Groups {
			if o.ID != g.ID {
				passing, dice = passing+float64(o.Yield)*float64(o.Dice), dice+o.Dice
			}
		}
		g.Text = fmt.Sprintf("yield %.1f %%, against %.1f %% of the other wafers", 100*float64(g.Yield), 100*passing/math.Max(1, float64(dice)))
		for _, s := range w.rep.Stacks {
			if s.Of == "group" && s.Group == g.ID {
				g.Text += "; " + patternWords(s.Signatures)
			}
		}
	}
}

// patternWords puts patterns into a phrase.
func patternWords(list []reports.Signature) string {
	var parts []string
	for _, s := range list {
		switch {
		case s.Kind == "none":
			parts = append(parts, "too few fails to see a pattern")
		case s.Kind == "random":
			parts = append(parts, "no pattern in common")
		case len(parts) < 3:
			parts = append(parts, strings.TrimPrefix(strings.ReplaceAll(s.Kind, "-", " ")+" "+s.Text, "site of "))
		}
	}
	return strings.Join(parts, "; ")
}
