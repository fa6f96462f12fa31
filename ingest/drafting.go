package ingest

import (
	"fmt"
	"maps"
	"math"
	"slices"
	"strconv"
	"strings"

	"kneepoint/config"
)

// Draft is the start of a product file for what a batch holds: its tests with
// their units, limits and conditions. What a test measures is guessed from its
// name and unit, and has to be looked over. Where lots differ, the first one
// that has a test speaks for it. Everything that the data cannot tell, the
// device above all, is left out; so is a floor, which a pile-up of readings
// only hints at. See DraftNotes for what was concluded from the dice, or could not be.
func Draft(b *Batch) *config.Product {
	p, _ := draftOf(b)
	return p
}

// DraftNotes says, a line each, what Draft concluded about the wafer and its
// passing bins, on what grounds, and what it could not tell.
func DraftNotes(b *Batch) []string {
	_, notes := draftOf(b)
	return notes
}

func draftOf(b *Batch) (*config.Product, []string) {
	p := &config.Product{TestTemperatureC: 25, Columns: map[string]string{}}
	seen := map[string]bool{}
	for _, l := range b.Lots {
		if p.Name == "" {
			p.Name = l.Product()
		}
		for _, t := range l.Tests() {
			if seen[t.Name] {
				continue
			}
			seen[t.Name] = true
			d := config.Test{Name: t.Name, Measures: t.Measures, Unit: t.Unit, Lower: t.Lower, Upper: t.Upper, Clamp: t.Clamp, Floor: math.NaN()}
			if d.Measures == "" {
				d.Measures = config.GuessMeasures(t.Name, t.Unit)
			}
			if c, err := config.ParseConditions(t.Condition); err == nil {
				d.At, d.AtText = c, t.Condition
			}
			p.Tests = append(p.Tests, d)
		}
	}
	notes := []string{draftWafer(p, b)}
	return p, append(notes, draftBins(p, b)...)
}

// draftWafer takes the wafer from what the files say of it. Without that, the
// outline of the dice gives the shape of a die only: a round wafer is as wide as
// high, whatever its size.
func draftWafer(p *config.Product, b *Batch) string {
	for _, l := range b.Lots {
		g := l.Geometry()
		if !g.Known() {
			continue
		}
		w := &p.Wafer
		if w.DiameterMM == 0 && w.DieWidthMM == 0 {
			w.DiameterMM, w.DieWidthMM, w.DieHeightMM = g.DiameterMM, g.DieWidthMM, g.DieHeightMM
		}
		if w.Notch == "" {
			w.Notch = g.Notch
		}
	}
	w := p.Wafer
	if w.DiameterMM > 0 && w.DieWidthMM > 0 && w.DieHeightMM > 0 {
		return fmt.Sprintf("wafer: diameter and die size are the file's own (%s mm, dice of %s by %s mm); the edge exclusion is not in it", number(w.DiameterMM), number(w.DieWidthMM), number(w.DieHeightMM))
	}
	columns, rows := 0, 0
	for _, l := range b.Lots {
		if l.HasCoordinates() {
			for _, wafer := range l.Wafers() {
				columns, rows = max(columns, extent(l.X()[wafer.Lo:wafer.Hi])), max(rows, extent(l.Y()[wafer.Lo:wafer.Hi]))
			}
		}
	}
	const few = 8 // columns or rows, below which an outline tells little
	switch {
	case columns == 0 || rows == 0:
		return "wafer: not drafted, as no file gives diameter and die size, and the dice have no coordinates"
	case columns < few || rows < few:
		return fmt.Sprintf("wafer: not drafted, as no file gives diameter and die size, and %d columns by %d rows of dice are too few to tell the shape of a die", columns, rows)
	case w.DiameterMM > 0:
		return fmt.Sprintf("wafer: die size not drafted, as no file gives it; if the %d columns by %d rows of dice reach across the %s mm, a die is at most about %s by %s mm with its street",
			columns, rows, number(w.DiameterMM), number(w.DiameterMM/float64(columns)), number(w.DiameterMM/float64(rows)))
	}
	return fmt.Sprintf("wafer: not drafted, as no file gives diameter and die size; the dice span %d columns by %d rows, so that on a full round wafer a die is about %s times as wide as it is high, and at most the diameter / %d wide",
		columns, rows, number(float64(rows)/float64(columns)), columns)
}

func number(v float64) string { return strconv.FormatFloat(v, 'g', 3, 64) }

// extent is how many columns or rows the dice span, 0 for none.
func extent(at []int32) int {
	lo, hi := int32(math.MaxInt32), int32(math.MinInt32)
	for _, v := range at {
		if v != Missing {
			lo, hi = min(lo, v), max(hi, v)
		}
	}
	if lo > hi {
		return 0
	}
	return int(int64(hi) - int64(lo) + 1)
}

// binCount is how the dice of a hard bin were judged.
type binCount struct{ dice, pass, fail int }

// draftBins finds the passing bins: by the file's own pass flags; else by limits,
// where a bin holds dice that keep all of them, or does not. A bin that holds both
// sorts is left out and named.
func draftBins(p *config.Product, b *Batch) []string {
	for _, l := range b.Lots {
		for bin, name := range l.HardBinNames() {
			if p.Bins.Names == nil {
				p.Bins.Names = map[int]string{}
			}
			if _, ok := p.Bins.Names[bin]; !ok {
				p.Bins.Names[bin] = name
			}
		}
	}
	bins, by := map[int]*binCount{}, "pass flags"
	if countBins(bins, b, (*Lot).flagged) == 0 {
		by = "limits"
		clear(bins)
		if countBins(bins, b, (*Lot).keepsLimits) == 0 {
			return []string{"bins: passing bins not drafted, as the files hold neither pass flags nor hard bins with limits to judge them by; without them bin 1 passes"}
		}
	}
	const pure = 0.99 // of a bin's judged dice
	var pass, mixed []string
	for _, bin := range slices.Sorted(maps.Keys(bins)) {
		n := bins[bin]
		switch judged := n.pass + n.fail; {
		case judged == 0:
		case float64(n.pass) >= pure*float64(judged):
			p.Bins.Pass = append(p.Bins.Pass, bin)
			pass = append(pass, fmt.Sprintf("%d (%d of %d dice)", bin, n.pass, n.dice))
		case float64(n.fail) < pure*float64(judged):
			mixed = append(mixed, fmt.Sprintf("%d (%d of %d dice pass)", bin, n.pass, judged))
		}
	}
	var notes []string
	if len(pass) > 0 {
		notes = append(notes, "bins: taken as passing by the "+by+": hard bin "+strings.Join(pass, ", "))
	} else {
		notes = append(notes, "bins: passing bins not drafted, as by the "+by+" no hard bin holds passing dice alone; without them bin 1 passes")
	}
	if len(mixed) > 0 {
		notes = append(notes, "bins: not settled by the "+by+", so left out: hard bin "+strings.Join(mixed, ", "))
	}
	return notes
}

// countBins counts dice by hard bin and verdict, and gives how many had both.
func countBins(bins map[int]*binCount, b *Batch, verdicts func(*Lot) func(row int) int) int {
	judged := 0
	for _, l := range b.Lots {
		hard, verdict := l.HardBin(), verdicts(l)
		if hard == nil || verdict == nil {
			continue
		}
		for i, bin := range hard {
			if bin == Missing {
				continue
			}
			n := bins[int(bin)]
			if n == nil {
				n = &binCount{}
				bins[int(bin)] = n
			}
			n.dice++
			switch verdict(i) {
			case 1:
				n.pass++
				judged++
			case -1:
				n.fail++
				judged++
			}
		}
	}
	return judged
}

// flagged is the verdict by the file's own flag: 1 pass, -1 fail, 0 none.
func (l *Lot) flagged() func(row int) int {
	pass := l.Pass()
	if pass == nil {
		return nil
	}
	return func(row int) int { return [...]int{0, -1, 1}[pass[row]+1] }
}

// keepsLimits is the verdict by limits: a reading outside fails a die; it passes
// when all tests with limits have readings, and none fails. What is only a bound
// fails where it is beyond a limit, and otherwise counts as its value.
func (l *Lot) keepsLimits() func(row int) int {
	var with []int
	for i, t := range l.Tests() {
		if t.Lower == t.Lower || t.Upper == t.Upper {
			with = append(with, i)
		}
	}
	if with == nil {
		return nil
	}
	return func(row int) int {
		verdict := 1
		for _, i := range with {
			t := &l.Tests()[i]
			switch v := l.Values(i)[row]; {
			case v < t.Lower, v > t.Upper:
				return -1
			case v != v:
				verdict = 0
			}
		}
		return verdict
	}
}
