package variance

import (
	"fmt"
	"math"
	"strings"
)

// Source names the component with the largest share, its index in Components, and
// whether the data leave no doubt: its share's lower limit is above every other's
// upper one. The index is -1 when nothing was estimated.
func (f Fit) Source() (index int, clear bool) {
	index = -1
	for i, c := range f.Components {
		if s := c.Share.Estimate; s == s && (index < 0 || s > f.Components[index].Share.Estimate) {
			index = i
		}
	}
	if index < 0 {
		return -1, false
	}
	for i, c := range f.Components {
		if i != index && c.Share.Estimate == c.Share.Estimate && !(c.Share.Upper < f.Components[index].Share.Lower) {
			return index, false
		}
	}
	return index, true
}

// where says in words what a component's differences are between.
func (f Fit) where(i int) string {
	c := f.Components[i]
	if c.Pattern {
		return "in what all groups share of the " + c.Level + "s"
	}
	above := ""
	for k := i - 1; k >= 0; k-- {
		if b := f.Components[k]; !b.Pattern && b.Variance.Estimate == b.Variance.Estimate {
			above = " of a " + b.Level
			break
		}
	}
	plural := c.Level + "s"
	if c.Level == "die" {
		plural = "dice"
	}
	return "between " + plural + above
}

// Text says in one sentence where the spread comes from, with numbers.
func (f Fit) Text() string {
	if f.Why != "" {
		return "The spread cannot be split: " + f.Why + "."
	}
	top, clear := f.Source()
	c := f.Components[top]
	var b strings.Builder
	fmt.Fprintf(&b, "%s %% of the variance of %d readings lies %s", percent(c.Share.Estimate), f.N, f.where(top))
	if c.Share.Lower == c.Share.Lower && len(f.estimated()) > 1 {
		fmt.Fprintf(&b, " (95 %%: %s to %s %%)", percent(c.Share.Lower), percent(c.Share.Upper))
	}
	for _, i := range f.estimated() {
		if i != top {
			fmt.Fprintf(&b, ", %s %% %s", percent(f.Components[i].Share.Estimate), f.where(i))
		}
	}
	if !clear && len(f.estimated()) > 1 {
		b.WriteString("; which is the largest is not settled by these data")
	}
	return b.String() + "."
}

func (f Fit) estimated() []int {
	var out []int
	for i, c := range f.Components {
		if c.Share.Estimate == c.Share.Estimate {
			out = append(out, i)
		}
	}
	return out
}

func percent(share float64) string {
	p := 100 * share
	if p != 0 && math.Abs(p) < 1 || p > 99 && p < 100 {
		return fmt.Sprintf("%.1f", p)
	}
	return fmt.Sprintf("%.0f", p)
}
