package build

import (
	"fmt"
	"sort"

	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/stats/yield"
	"kneepoint/wafermap"
)

// lotYield fills in the yield of the lot: the count, with the interval for the
// process that the wafers were drawn from.
func (w *lotwork) lotYield() {
	var passing, dice []int
	var first int
	for i, r := range w.rep.Wafers {
		passing, dice = append(passing, r.Passing), append(dice, r.Dice)
		first += w.firstPassing[i]
	}
	n, k := w.lot.Len(), count(w.pass)
	y := &w.rep.Yield
	if w.unjudged != "" {
		*y = reports.LotYield{Interval: unknown(w.unjudged), Counting: unknown(w.unjudged), FirstPass: reports.NaN,
			SystematicLoss: reports.NaN, RandomLoss: reports.NaN, LossWhy: w.unjudged, Baseline: w.baselineYield()}
		return
	}
	y.Interval = interval(yield.Process(passing, dice, confidence))
	counting := yield.Wilson(k, n, confidence)
	counting.Method = "Wilson, counting only"
	y.Counting = interval(counting)
	y.Passing = k
	y.FirstPass = share(first, n)
	w.lossSplit()
	y.Baseline = w.baselineYield()
}

func (w *lotwork) baselineYield() reports.Number {
	if p := w.in.Product; p != nil && p.Baseline != nil {
		return num(p.Baseline.Yield)
	}
	return reports.NaN
}

// unknown is an interval of which nothing is known, and why.
func unknown(why string) reports.Interval {
	return reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: why}
}

// lossSplit splits the loss into what dice lose one by one and what they lose
// together.
func (w *lotwork) lossSplit() {
	y := &w.rep.Yield
	y.SystematicLoss, y.RandomLoss = reports.NaN, reports.NaN
	if !w.lot.HasCoordinates() {
		y.LossWhy = "the data have no die coordinates"
		return
	}
	s := yield.Windows(w.lot.X(), w.lot.Y(), w.code, w.pass, confidence)
	if y.LossWhy = s.Why; !finite(s.Systematic.Estimate) {
		return
	}
	y.SystematicLoss, y.RandomLoss = num(s.Systematic.Estimate), num(s.Random.Estimate)
	y.LossSplit = &reports.LossSplit{Systematic: interval(s.Systematic), Random: interval(s.Random), RandomRate: interval(s.RandomRate)}
	for _, size := range s.Sizes {
		y.LossSplit.Windows = append(y.LossSplit.Windows, reports.Window{Wide: size.Wide, High: size.High, Count: size.Windows, Yield: num(size.Good), Fitted: num(size.Fitted)})
	}
}

// waferCode numbers each die's wafer.
func waferCode(lot *ingest.Lot) []int32 {
	code := make([]int32, lot.Len())
	for i, r := range lot.Wafers() {
		for row := r.Lo; row < r.Hi; row++ {
			code[row] = int32(i)
		}
	}
	return code
}

// bins fills in the bins by falling count (failing ones first in line for the
// reader) and the passing ones as grades when there are several.
func (w *lotwork) bins() {
	for _, kind := range []struct {
		name   string
		column []int32
	}{{"hard", w.lot.HardBin()}, {"soft", w.lot.SoftBin()}} {
		if kind.column == nil {
			continue
		}
		w.rep.Bins = append(w.rep.Bins, w.binTable(kind.name, kind.column)...)
	}
	grades := w.lot.HardBin()
	if grades == nil {
		grades = w.lot.SoftBin()
	}
	if grades == nil {
		return
	}
	dice := map[int32]int{}
	for i, b := range grades {
		if w.pass[i] && b != ingest.Missing {
			dice[b]++
		}
	}
	if p := w.in.Product; p != nil {
		for _, b := range p.Bins.Pass {
			dice[int32(b)] += 0 // a grade with no dice is worth a line
		}
	}
	if len(dice) < 2 {
		return
	}
	for _, b := range sortedBins(dice) {
		w.rep.Yield.Grades = append(w.rep.Yield.Grades, reports.Grade{Bin: int(b), Name: w.binName(b), Dice: dice[b], Share: share(dice[b], w.lot.Len())})
	}
}

// binTable counts one bin column. A bin counts as passing when most of its dice
// pass; the cumulative share runs over failing bins by falling count.
func (w *lotwork) binTable(kind string, column []int32) []reports.Bin {
	dice, passing := map[int32]int{}, map[int32]int{}
	for i, b := range column {
		if b == ingest.Missing {
			continue
		}
		dice[b]++
		if w.pass[i] {
			passing[b]++
		}
	}
	var out []reports.Bin
	for _, b := range sortedBins(dice) {
		r := reports.Bin{Kind: kind, Bin: int(b), Dice: dice[b], Share: share(dice[b], w.lot.Len()), Pass: 2*passing[b] > dice[b], Cumulative: reports.NaN}
		if kind == "hard" {
			r.Name = w.binName(b)
		} else {
			r.Name = w.lot.SoftBinNames()[int(b)]
		}
		out = append(out, r)
	}
	sort.SliceStable(out, func(a, b int) bool {
		if out[a].Pass != out[b].Pass {
			return out[a].Pass
		}
		if out[a].Pass {
			return out[a].Bin < out[b].Bin
		}
		return out[a].Dice > out[b].Dice
	})
	failing, sum := 0, 0
	for _, r := range out {
		if !r.Pass {
			failing += r.Dice
		}
	}
	for i := range out {
		if !out[i].Pass {
			sum += out[i].Dice
			out[i].Cumulative = share(sum, failing)
		}
	}
	return out
}

// binName is a hard bin's name in the product file, or else in the data file.
func (w *lotwork) binName(bin int32) string {
	if p := w.in.Product; p != nil && p.Bins.Names[int(bin)] != "" {
		return p.Bins.Names[int(bin)]
	}
	return w.lot.HardBinNames()[int(bin)]
}

func sortedBins(dice map[int32]int) []int32 {
	out := make([]int32, 0, len(dice))
	for b := range dice {
		out = append(out, b)
	}
	sort.Slice(out, func(a, b int) bool { return out[a] < out[b] })
	return out
}

// findGeometry finds the wafer's grid from the product file and the dice.
func (w *lotwork) findGeometry() {
	g := &w.rep.Geometry
	*g = reports.Geometry{DiameterMM: reports.NaN, DieWidthMM: reports.NaN, DieHeightMM: reports.NaN,
		EdgeExclusionMM: reports.NaN, CentreX: reports.NaN, CentreY: reports.NaN}
	if !w.lot.HasCoordinates() {
		g.Why = "the data have no die coordinates: maps, rings and clusters are left out"
		return
	}
	w.geo = wafermap.FindGeometry(w.lot.X(), w.lot.Y(), w.known())
	g.CentreX, g.CentreY, g.Source, g.Why = num(w.geo.CentreX), num(w.geo.CentreY), w.geo.Source, w.geo.Why
	if w.inMM() {
		g.DiameterMM, g.DieWidthMM, g.DieHeightMM = num(w.geo.DiameterMM), num(w.geo.DieWidthMM), num(w.geo.DieHeightMM)
		if w.geo.EdgeExclusionMM > 0 {
			g.EdgeExclusionMM = num(w.geo.EdgeExclusionMM)
		}
	}
	if w.geo.Caution != "" {
		w.note("geometry-doubtful", reports.Quality{Severity: "warning", Dice: w.lot.Len(), Text: w.geo.Caution,
			Remedy: "check the wafer block of the product file: diameter, die width and height"})
	}
}

// inMM says whether lengths on the wafer are known in millimetres, and not only in
// dice.
func (w *lotwork) inMM() bool { return w.geo.Unit == "mm" }

func (w *lotwork) known() wafermap.Known {
	var k wafermap.Known
	if p := w.in.Product; p != nil {
		k = wafermap.Known{DiameterMM: p.Wafer.DiameterMM, DieWidthMM: p.Wafer.DieWidthMM, DieHeightMM: p.Wafer.DieHeightMM,
			EdgeExclusionMM: p.Wafer.EdgeExclusionMM, Notch: p.Wafer.Notch}
	}
	// What the product file leaves open, the data file may say.
	g := w.lot.Geometry()
	k.DiameterMM, k.DieWidthMM, k.DieHeightMM = or(k.DiameterMM, g.DiameterMM), or(k.DieWidthMM, g.DieWidthMM), or(k.DieHeightMM, g.DieHeightMM)
	if k.Notch == "" {
		k.Notch = g.Notch
	}
	k.YDown = g.YGrows == "down"
	return k
}

// or is a, or b where a is not given.
func or(a, b float64) float64 {
	if a > 0 || !(b > 0) {
		return a
	}
	return b
}

// zones fills in the yield of rings of equal area and of sectors, over all wafers.
func (w *lotwork) zones() {
	if !w.lot.HasCoordinates() || w.geo.Unit == "" || w.unjudged != "" {
		return
	}
	rings, sectors := w.in.Settings.Rings, w.in.Settings.Sectors
	z := wafermap.ZoneYields(w.geo, w.lot.X(), w.lot.Y(), w.pass, rings, sectors)
	edges := w.geo.RingEdges(rings)
	for i, c := range z.Rings {
		r := reports.Zone{Kind: "ring", Index: i, Dice: c.Dice, Name: ringName(i, rings), Yield: zoneYield(c)}
		r.From, r.To = reports.NaN, reports.NaN
		if w.inMM() {
			r.From, r.To = num(edges[i]), num(edges[i+1])
		}
		w.rep.Zones = append(w.rep.Zones, r)
	}
	for i, c := range z.Sectors {
		from, to := 360*float64(i)/float64(sectors), 360*float64(i+1)/float64(sectors)
		w.rep.Zones = append(w.rep.Zones, reports.Zone{Kind: "sector", Index: i, Dice: c.Dice,
			Name: fmt.Sprintf("%.0f to %.0f degrees", from, to), From: num(from), To: num(to), Yield: zoneYield(c)})
	}
}

func zoneYield(c wafermap.ZoneCount) reports.Interval {
	y := yield.Wilson(c.Passing, c.Dice, confidence)
	y.Method = "Wilson, counting only"
	return interval(y)
}

func ringName(i, rings int) string {
	switch i {
	case 0:
		return "centre"
	case rings - 1:
		return "edge"
	}
	return fmt.Sprintf("ring %d", i+1)
}

func percent(p float64) string { return fmt.Sprintf("%g %%", p) }
