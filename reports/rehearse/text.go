package rehearse

import (
	"fmt"
	"io"
	"strings"

	"kneepoint/reports/causes"
)

// WriteText writes the tables for a terminal of 80 columns.
func (r *Result) WriteText(w io.Writer) error {
	var b strings.Builder
	r.head(&b)
	r.confusionText(&b)
	r.sizesText(&b)
	r.reliabilityText(&b)
	r.alikeText(&b)
	r.addedText(&b)
	_, err := io.WriteString(w, b.String())
	return err
}

func (r *Result) head(b *strings.Builder) {
	fmt.Fprintf(b, "%d made-up lots of %s, seed %d, with the tests\n", r.Lots, printable(r.Product), r.Seed)
	wrap(b, "  ", strings.Join(r.Tests, ", "))
	if r.Calibrated != "" {
		wrap(b, "", r.Calibrated)
	} else {
		wrap(b, "", "not calibrated: usual weights; told probabilities are not to be trusted")
	}
	for _, a := range r.Assumed {
		wrap(b, "", "assumed: "+a)
	}
	if r.Laws != "" {
		wrap(b, "", "lots follow plain slopes and not the device model: "+r.Laws)
	}
	for _, o := range r.OutOfReach {
		wrap(b, "", fmt.Sprintf("%s: no believable size costs 1 %% of the dice in %d draws; other causes stood in", o.Cause, o.Lots))
	}
	b.WriteString("\n")
	line := func(label string, s Share) {
		fmt.Fprintf(b, "  %-52s %s\n", label, percents(s))
	}
	fmt.Fprintf(b, "Lots with causes that cost 3 %% of the dice or more\n")
	line("one cause: named first", r.Singles)
	line("one cause: it, or one the tests cannot tell from it", r.Within)
	line("  of them with others that cannot be told from it", r.InClass)
	line("two causes: one of them named first", r.Pairs)
	line("two causes: both told above 50 %", r.PairsBoth)
	line("no known cause: called unexplained", r.Odd)
	line("healthy: given a cause above 50 %", r.Accused)
	fmt.Fprintf(b, "  %-52s %5.1f %%\n\n", "expected calibration error of the first cause", 100*r.Reliability.Error)
}

func percents(s Share) string {
	if s.Lots == 0 {
		return "    - (no lots)"
	}
	return fmt.Sprintf("%5.1f %% (%.0f-%.0f) of %d", 100*s.Estimate(), 100*s.Lower, 100*s.Upper, s.Lots)
}

// confusionText is the table of what was there by what was named.
func (r *Result) confusionText(b *strings.Builder) {
	c := &r.Confusion
	fmt.Fprintf(b, "What was there (rows) and what was named first (columns), lots\n")
	fmt.Fprintf(b, "%-25s", "")
	for j := range c.Causes {
		fmt.Fprintf(b, "%3d", j+1)
	}
	b.WriteString("\n")
	for i, row := range c.Counts {
		fmt.Fprintf(b, "%2d %-22.22s", i+1, printable(c.Causes[i]))
		for j, n := range row {
			switch {
			case n == 0 && i == j:
				b.WriteString("  0")
			case n == 0:
				b.WriteString("  .")
			default:
				fmt.Fprintf(b, "%3d", n)
			}
		}
		b.WriteString("\n")
	}
	b.WriteString("\n")
}

// sizesText is the account by cause with the smallest size that is found.
func (r *Result) sizesText(b *strings.Builder) {
	fmt.Fprintf(b, "%-23s%-28s%s\n", "", "named first, 3 % or more", "loss from which it is named")
	fmt.Fprintf(b, "%-23s%-28s%s\n", "", "share (95 %)     within", "first 9 times in 10 (95 %)")
	for i := range r.Causes {
		c := &r.Causes[i]
		first, within := "-", "-"
		if c.First.Lots > 0 {
			first = fmt.Sprintf("%3.0f %% (%.0f-%.0f)", 100*c.First.Estimate(), 100*c.First.Lower, 100*c.First.Upper)
			within = fmt.Sprintf("%3.0f %%", 100*c.Within.Estimate())
		}
		fmt.Fprintf(b, "%-23s%-17s%-11s%s\n", c.Cause, first, within, c.Smallest.text())
	}
	b.WriteString("\n")
}

// text is the smallest size in words.
func (s *Smallest) text() string {
	of := fmt.Sprintf("of %d", s.Lots)
	end := func(x float64) string {
		switch {
		case x <= rehearsalLeast*1.0001:
			return "<1"
		case x >= mostLoss*0.9999:
			return ">40"
		}
		return fmt.Sprintf("%.2g", 100*x)
	}
	switch {
	case s.Why != "":
		return s.Why + ", " + of
	case s.Beyond < 0:
		return fmt.Sprintf("under 1 %% (to %s) %s", end(s.Upper), of)
	case s.Beyond > 0:
		return fmt.Sprintf("not by 40 %% (from %s) %s", end(s.Lower), of)
	}
	return fmt.Sprintf("%.2g %% (%s to %s) %s", 100*s.Loss, end(s.Lower), end(s.Upper), of)
}

func (r *Result) reliabilityText(b *strings.Builder) {
	b.WriteString("Told probability of the first cause against how often it was there\n")
	b.WriteString("    told   right  95 %       lots   0        told (o) and right (x)       1\n")
	for _, bin := range r.Reliability.Bins {
		line := []rune(strings.Repeat(".", 41))
		at := func(p float64) int { return int(p*40 + 0.5) }
		for i := at(bin.Lower); i <= at(bin.Upper); i++ {
			line[i] = '-'
		}
		line[at(bin.Estimate())] = 'x'
		if k := at(bin.Told); line[k] == 'x' {
			line[k] = '*'
		} else {
			line[k] = 'o'
		}
		fmt.Fprintf(b, "  %4.0f %%  %4.0f %%  %3.0f-%-3.0f %6d   %s\n", 100*bin.Told, 100*bin.Estimate(), 100*bin.Lower, 100*bin.Upper, bin.Lots, string(line))
	}
	b.WriteString("\n")
}

func (r *Result) alikeText(b *strings.Builder) {
	b.WriteString("What cannot be told apart\n")
	if len(r.Alike) == 0 {
		b.WriteString("  by levels: no pair of causes has directions alike over these tests\n")
	}
	for _, a := range r.Alike {
		fmt.Fprintf(b, "  by levels: %s and %s (cosine %.2f)\n", a.A, a.B, a.Cosine)
	}
	for _, c := range r.confused() {
		what := "named"
		if c.Named == causes.Nothing || c.Named == causes.Unknown {
			what = "called"
		}
		fmt.Fprintf(b, "  seen: %s %s %s in %d of %d lots\n", c.There, what, c.Named, c.Lots, c.Of)
	}
	b.WriteString("\n")
}

func (r *Result) addedText(b *strings.Builder) {
	b.WriteString("What one more test would bring (gain in bits of the true cause)\n")
	for _, a := range r.Added {
		if a.Why != "" {
			wrap(b, "  ", fmt.Sprintf("%-28s could not be tried: %s", printable(a.Test), a.Why))
			continue
		}
		fmt.Fprintf(b, "  %-28.28s %+.2f (standard error %.2f) on %d lots\n", printable(a.Test), a.Bits, a.Error, a.Lots)
		var more []string
		for _, s := range a.Splits {
			more = append(more, fmt.Sprintf("splits %s from %s", s.A, s.B))
		}
		for _, g := range a.GainsMost {
			more = append(more, fmt.Sprintf("%s %+.1f", g.Cause, g.Bits))
		}
		if len(more) > 0 {
			wrap(b, "      ", strings.Join(more, "; "))
		}
	}
	if best := r.Best(); best != nil {
		wrap(b, "", "most would help: "+printable(best.Test))
	} else {
		wrap(b, "", "no added test gains more than twice its standard error or splits a pair: the product's tests tell about what can be told")
	}
}

// Best is the added test that would help most: the one of most bits among those that
// gain more than twice their standard error, else the one that splits most pairs; nil
// when no test does either.
func (r *Result) Best() *Added {
	var best *Added
	for i := range r.Added {
		a := &r.Added[i]
		if a.Lots > 0 && a.Bits > 2*a.Error {
			return a
		}
		if len(a.Splits) > 0 && (best == nil || len(a.Splits) > len(best.Splits)) {
			best = a
		}
	}
	return best
}

// printable keeps control characters of the product file off the terminal.
func printable(s string) string {
	return strings.Map(func(c rune) rune {
		if c < ' ' || c == 0x7f || c >= 0x80 && c < 0xa0 {
			return '?'
		}
		return c
	}, s)
}

// wrap writes text in lines of at most 80 columns behind an indent.
func wrap(b *strings.Builder, indent, text string) {
	at := 0
	for _, word := range strings.Fields(printable(text)) {
		n := len([]rune(word))
		switch {
		case at == 0:
			b.WriteString(indent)
			at = len(indent)
		case at+1+n > 80:
			b.WriteString("\n" + indent)
			at = len(indent)
		default:
			b.WriteString(" ")
			at++
		}
		b.WriteString(word)
		at += n
	}
	b.WriteString("\n")
}
