package causes

import (
	"fmt"
	"sort"
	"strings"
)

// Table shows the six likeliest hypotheses with their views, for developers.
func (v *Verdict) Table() string {
	var b strings.Builder
	j := v.j
	p := j.posterior(&v.weigh)
	order := make([]int, len(p))
	for i := range order {
		order[i] = i
	}
	sort.SliceStable(order, func(a, b int) bool { return p[order[a]] > p[order[b]] })
	fmt.Fprintf(&b, "  flags %v\n  singles", j.e.Flags)
	for c, n := range j.e.single(len(j.k.Classes)) {
		if n > 0.5 {
			fmt.Fprintf(&b, " %s:%.0f(+%.0f)", j.k.Classes[c].Class, n, j.dice.excess[c])
		}
	}
	fmt.Fprintf(&b, " of %d, yield %.3f\n  lot ", j.e.Dice, j.e.yield())
	for i, t := range j.f.tests {
		fmt.Fprintf(&b, " %s %.3f(%.1f)", j.e.cols.Tests[t].Name, j.s.lot[i], j.s.lot[i]/j.f.lot[i])
	}
	b.WriteString("\n  maps ")
	for g := range groups {
		if j.maps.strength[g] > 0 {
			fmt.Fprintf(&b, " %s(%.1f):", groups[g].name, j.maps.strength[g])
			for i, s := range j.maps.share[g] {
				if s > 0.05 {
					fmt.Fprintf(&b, " %s %.2f", patterns[i], s)
				}
			}
		}
	}
	if h := j.all[order[0]]; len(h.sees) > 0 && h.sees[0] != nil {
		x := h.sees[0]
		fmt.Fprintf(&b, "\n  best variant test %d moves", x.v.test)
		if len(x.v.moves) > 0 {
			for i, m := range x.v.moves[len(x.v.moves)/2] {
				fmt.Fprintf(&b, " %s %.3f", j.e.cols.Tests[j.f.tests[i]].Name, m)
			}
		}
		for w := range x.affected {
			if x.affected[w] > 3 {
				fmt.Fprintf(&b, "\n   wafer %d (%.1f)", w, x.affected[w])
				for i := range j.f.tests {
					fmt.Fprintf(&b, " %.3f(%.1f)", j.s.wafers[w][i], j.s.wafers[w][i]/j.f.wafer[i])
				}
			}
		}
	}
	b.WriteString("\n")
	for _, i := range order[:6] {
		h := j.all[i]
		name := ""
		for n, c := range h.causes {
			name += fmt.Sprintf("%s.%d ", j.k.Causes[c].Cause, h.dirs[n])
		}
		if h.unknown {
			name = "unknown"
		}
		fmt.Fprintf(&b, "  %.3f %-40s odds %.1f views %.1f\n", p[i], name, h.odds, h.views)
	}
	return b.String()
}
