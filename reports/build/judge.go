package build

import (
	"fmt"
	"math"
	"slices"
	"sort"

	"kneepoint/config"
	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/stats/yield"
)

// A judge decides whether a die passes. The rule, from the first that applies
// (design 3.4): its bin is one of the product's passing bins; the file's own
// flag; hard bin 1; every limit holds. A blank reading never fails a die, but a die
// without a bin and without any reading does not pass.
type judge struct {
	bins    config.Bins
	tests   []ingest.Test
	useBin  bool // bins.pass is given and the data have bins
	hasFlag bool
	hasBin  bool
}

func newJudge(lot *ingest.Lot, p *config.Product) judge {
	j := judge{tests: lot.Tests(), hasFlag: lot.Pass() != nil, hasBin: lot.HardBin() != nil || lot.SoftBin() != nil}
	if p != nil {
		j.bins = p.Bins
	}
	j.useBin = j.hasBin && len(j.bins.Pass) > 0
	return j
}

// rule says in words how dice are judged.
func (j judge) rule() string {
	switch {
	case j.blind():
		return "not known: the data have no bins and no pass flag, and no test has a limit"
	case j.useBin:
		return fmt.Sprintf("a die passes when its bin is one of %v (product file)", j.bins.Pass)
	case j.hasFlag:
		return "a die passes when the data file's own flag says so"
	case j.hasBin:
		return "a die passes when its bin is 1 (no passing bins in the product file)"
	}
	return "no bins in the data: a die passes when every limit holds"
}

// blind says that nothing tells passing dice from failing ones.
func (j judge) blind() bool {
	if j.hasBin || j.hasFlag {
		return false
	}
	for _, t := range j.tests {
		if finite(t.Lower) || finite(t.Upper) {
			return false
		}
	}
	return true
}

// passes judges one reading of a die. hard and soft are ingest.Missing, and flag
// -1, where the file has nothing; value returns the reading of a test.
func (j judge) passes(hard, soft int32, flag int8, value func(test int) (float64, int8)) bool {
	bin := hard
	if bin == ingest.Missing {
		bin = soft
	}
	if j.useBin && bin != ingest.Missing {
		return j.bins.PassBin(int(bin))
	}
	if flag >= 0 {
		return flag == 1
	}
	if bin != ingest.Missing {
		return bin == 1
	}
	read := false
	for t := range j.tests {
		v, mark := value(t)
		if outside(v, mark, j.tests[t].Lower, j.tests[t].Upper) {
			return false
		}
		read = read || !math.IsNaN(v)
	}
	return read
}

// outside reports whether a reading breaks a limit.
func outside(v float64, mark int8, lower, upper float64) bool {
	low, high := yield.Breaks(v, mark, lower, upper)
	return low || high
}

// judgeDice judges every die by its last valid measurement, and by its first for
// the first-pass yield.
func (w *lotwork) judgeDice() {
	lot := w.lot
	j := newJudge(lot, w.in.Product)
	w.rep.Program.PassRule = j.rule()
	values, marks := make([][]float64, len(j.tests)), make([][]int8, len(j.tests))
	for t := range j.tests {
		values[t], marks[t] = lot.Values(t), lot.Censor(t)
	}
	w.pass = make([]bool, lot.Len())
	if j.blind() {
		w.unjudged = "whether a die passes is " + j.rule()
		w.note("not-judged", reports.Quality{Severity: "warning", Dice: lot.Len(), Text: w.unjudged, Remedy: "give limits in a product file, or export the bins"})
		for i := range w.pass {
			w.pass[i] = true // for the accounts that are over passing dice; no yield is given
		}
		w.retested, w.firstPassing = make([]int, len(lot.Wafers())), make([]int, len(lot.Wafers()))
		return
	}
	var row int
	value := func(t int) (float64, int8) {
		if marks[t] == nil {
			return values[t][row], 0
		}
		return values[t][row], marks[t][row]
	}
	hard, soft, flag := lot.HardBin(), lot.SoftBin(), lot.Pass()
	for row = range w.pass {
		w.pass[row] = j.passes(at(hard, row), at(soft, row), flagAt(flag, row), value)
	}
	w.firstPass(j)
	w.tellBlankBins(j)
}

// tellBlankBins counts the dice that were judged otherwise because their bin is
// blank where others have one.
func (w *lotwork) tellBlankBins(j judge) {
	if !j.hasBin || j.hasFlag && !j.useBin {
		return
	}
	hard, soft := w.lot.HardBin(), w.lot.SoftBin()
	n := 0
	for row := range w.pass {
		if at(hard, row) == ingest.Missing && at(soft, row) == ingest.Missing {
			n++
		}
	}
	if n == 0 {
		return
	}
	by := "by the limits"
	if j.hasFlag {
		by = "by the file's own flag"
	}
	w.note("judged-without-bin", reports.Quality{Severity: "warning", Dice: n,
		Text: fmt.Sprintf("%d dice have no bin where others have one; they are judged %s", n, by), Remedy: "see why the tester gave them no bin"})
}

// firstPass counts the dice that passed when they were first measured, by wafer.
func (w *lotwork) firstPass(j judge) {
	lot, early := w.lot, w.lot.Earlier()
	w.retested = make([]int, len(lot.Wafers()))
	w.firstPassing = make([]int, len(lot.Wafers()))
	index := lot.FirstPass().Index
	var first int
	value := func(t int) (float64, int8) { return early.Values[t][first], 0 }
	for i, wafer := range lot.Wafers() {
		for row := wafer.Lo; row < wafer.Hi; row++ {
			pass := w.pass[row]
			if index != nil && index[row] >= 0 {
				first = int(index[row])
				w.retested[i]++
				pass = j.passes(at(early.HardBin, first), at(early.SoftBin, first), flagAt(early.Pass, first), value)
			}
			if pass {
				w.firstPassing[i]++
			}
		}
	}
}

// testLosses splits the lost dice over the tests and tells the kind of program.
// The program's order is the product file's; where a program that stops at the
// first fail shows itself only in the order of the data file, that order holds.
func (w *lotwork) testLosses() {
	tests := w.lot.Tests()
	w.data = make([]yield.TestData, len(tests))
	order, fileOrder := make([]int, len(tests)), make([]int, len(tests))
	for t := range tests {
		w.data[t] = yield.TestData{Values: w.lot.Values(t), Censor: w.lot.Censor(t), Lower: tests[t].Lower, Upper: tests[t].Upper}
		order[t], fileOrder[t] = t, t
	}
	sort.SliceStable(fileOrder, func(a, b int) bool { return tests[fileOrder[a]].Place < tests[fileOrder[b]].Place })
	w.lossesIn(order)
	if !w.losses.StopOnFail && !slices.Equal(order, fileOrder) {
		if w.lossesIn(fileOrder); w.losses.StopOnFail {
			w.losses.StopText += "; the order is that of the data file, which differs from the product file's"
		} else {
			w.lossesIn(order)
			w.note("test-order", reports.Quality{Severity: "info", Text: "the product file lists the tests in another order than the data file; dice are charged to the first failing test in the product file's order",
				Remedy: "list the tests in the order of the program"})
		}
	}
	w.rep.Program.StopOnFail = w.losses.StopOnFail
	w.rep.Program.Text = w.losses.StopText
	d := w.losses.Disagree
	if n := d.PassBinFailLimit; n > 0 {
		w.note("passing-die-outside-limit", reports.Quality{Severity: "warning", Dice: n,
			Text:   fmt.Sprintf("%d passing dice have a reading outside a limit; the bin counts", n),
			Remedy: "compare the limits of the product file with those of the test program"})
	}
	if n := d.FailBinPassLimit; n > 0 {
		w.note("failing-die-inside-limits", reports.Quality{Severity: "warning", Dice: n,
			Text:   fmt.Sprintf("%d failing dice have no reading outside a limit; the bin counts, and no test is charged with the loss", n),
			Remedy: "see whether a test is missing from the data, or a limit of the product file is wider than the program's"})
	}
}

// lossesIn finds the losses with the tests in the order given, and files them under
// the tests' own indexes.
func (w *lotwork) lossesIn(order []int) {
	data := make([]yield.TestData, len(order))
	for k, t := range order {
		data[k] = w.data[t]
	}
	l := yield.TestLosses(data, w.pass, w.in.Settings.MarginalPercent/100)
	first := yield.FirstFailing(data, w.pass)
	byTest := make([]yield.Loss, len(order))
	for k, t := range order {
		byTest[t] = l.Tests[k]
	}
	for i, k := range first {
		if k >= 0 {
			first[i] = int32(order[k])
		}
	}
	l.Tests = byTest
	w.losses, w.first, w.position = l, first, order
}

func (w *lotwork) note(code string, q reports.Quality) {
	q.Code = code
	w.rep.Quality = append(w.rep.Quality, q)
}

func at(column []int32, row int) int32 {
	if column == nil {
		return ingest.Missing
	}
	return column[row]
}

func flagAt(column []int8, row int) int8 {
	if column == nil {
		return -1
	}
	return column[row]
}

func share(k, n int) reports.Number {
	if n == 0 {
		return reports.NaN
	}
	return reports.Number(float64(k) / float64(n))
}

func finite(v float64) bool { return !math.IsNaN(v) && !math.IsInf(v, 0) }
