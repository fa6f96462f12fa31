package assoc

import (
	"fmt"
	"math"
	"strings"
)

// sentence puts a finding in words.
func (f Finding) sentence() string {
	if f.P != f.P {
		return fmt.Sprintf("%s against %s: not judged, %s.", f.name(), f.With, f.Why)
	}
	var b strings.Builder
	if !f.Dependent() {
		fmt.Fprintf(&b, "No sign that %s goes with %s", f.name(), f.With)
	} else {
		b.WriteString(f.claim())
	}
	fmt.Fprintf(&b, " (%d %s; p %s", f.N, f.Cases, small(f.P))
	if f.Looks > 1 {
		fmt.Fprintf(&b, ", %s adjusted for %d looks", small(f.Adjusted), f.Looks)
	}
	b.WriteString(").")
	if f.Cases == "dice" {
		b.WriteString(" One wafer only: dice are taken as independent, which they are not, so this says less than its p.")
	} else if f.Dependent() && f.say.order {
		b.WriteString(" Test order follows the place on the wafer: a pattern on the wafer looks alike.")
	}
	return b.String()
}

// claim says what differs, and by how much.
func (f Finding) claim() string {
	direction := "rises"
	if f.Effect.Estimate < 0 {
		direction = "falls"
	}
	if f.Furthest < 0 {
		if f.Within {
			return fmt.Sprintf("%s %s with %s within wafers: by %s from the first to the last quarter of the dice%s",
				f.capital(), direction, f.With, f.difference(), f.limits())
		}
		return fmt.Sprintf("%s %s with %s: by %s from %.4g to %.4g%s", f.capital(), direction, f.With, f.difference(), f.say.low, f.say.high, f.limits())
	}
	g := f.Groups[f.Furthest]
	what := fmt.Sprintf("%s %s", f.With, g.Label)
	middle := "median "
	if f.say.yield {
		middle = ""
	}
	where := fmt.Sprintf("the %d %s of %s", g.Units, f.Cases, what)
	if f.Within {
		where = "dice of " + what
	}
	than := "higher"
	if f.Effect.Estimate < 0 {
		than = "lower"
	}
	bend := ""
	if f.Bend {
		bend = ", neither rising nor falling throughout"
	}
	return fmt.Sprintf("%s differs by %s%s: %s%s on %s, %s %s than elsewhere%s",
		f.capital(), f.With, bend, middle, f.level(g.Level), where, f.difference(), than, f.limits())
}

func (f Finding) name() string {
	if f.say.yield {
		return "the yield"
	}
	return f.Of
}

// capital is the response's name as a sentence begins with it.
func (f Finding) capital() string {
	if f.say.yield {
		return "The yield"
	}
	return f.Of
}

// level is a value in its unit.
func (f Finding) level(v float64) string {
	if f.say.yield {
		return fmt.Sprintf("%.1f %%", 100*v)
	}
	return strings.TrimSpace(fmt.Sprintf("%.4g %s", v*f.say.scale, f.say.unit))
}

// difference is the size of the effect in its unit, and in sigmas.
func (f Finding) difference() string {
	v := math.Abs(f.Effect.Estimate)
	if f.say.yield {
		return fmt.Sprintf("%.1f points", 100*v)
	}
	s := strings.TrimSpace(fmt.Sprintf("%.3g %s", v*f.say.scale, f.say.unit))
	if f.InSigmas == f.InSigmas {
		s += fmt.Sprintf(" (%.2g sigma)", math.Abs(f.InSigmas))
	}
	return s
}

// limits is the effect's interval, by size.
func (f Finding) limits() string {
	lo, hi := f.Effect.Lower, f.Effect.Upper
	if lo != lo || hi != hi {
		return ""
	}
	if f.Effect.Estimate < 0 {
		lo, hi = -hi, -lo
	}
	scale := f.say.scale
	if f.say.yield {
		scale = 100
	}
	return fmt.Sprintf(", 95 %%: %.3g to %.3g", lo*scale, hi*scale)
}

func small(p float64) string {
	switch {
	case p < 0.0001:
		return "< 0.0001"
	case p < 0.01:
		return fmt.Sprintf("%.2g", p)
	}
	return fmt.Sprintf("%.2f", p)
}
