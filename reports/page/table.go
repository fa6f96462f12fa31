package page

import (
	"strconv"

	"kneepoint/reports"
)

// table is a table of numbers with its caption. Every table of the page is one,
// so that all sort, scroll and print alike.
type table struct {
	Caption  string
	Columns  []column
	Rows     [][]cell
	Sortable bool
	Note     string // a line under the table
}

type column struct {
	Name    string
	Numeric bool
	Help    string // longer name, for the pointer and for assistive software
	Plain   bool   // not a sorting key
}

// cell is one field. Sort is what sorting compares where that is not the text.
type cell struct {
	Text  string
	Sort  string
	Href  string
	Class string
	Bar   *bar
}

func text(s string) cell { return cell{Text: s} }

// number is a cell written as s and sorted by v; without a value it sorts last.
func number(s string, v reports.Number) cell {
	return cell{Text: s, Sort: sortKey(float64(v))}
}

func counted(n int) cell { return cell{Text: count(n), Sort: strconv.Itoa(n)} }

func sortKey(v float64) string {
	if !reports.Number(v).Valid() {
		return ""
	}
	return strconv.FormatFloat(v, 'g', 8, 64)
}

// bar is a small drawing inside a cell: an interval with its estimate on a
// common scale, or a plain bar from the left. Positions are in percent of the
// width.
type bar struct {
	From, To float64
	At       float64 // the estimate; below 0 when there is none
	Low      bool    // stands out
	Plain    bool
}

// intervalBar places an interval on the scale from low to 1.
func intervalBar(i reports.Interval, low float64, standsLow bool) *bar {
	if !i.Estimate.Valid() {
		return nil
	}
	at := func(v reports.Number) float64 {
		if !v.Valid() {
			v = i.Estimate
		}
		return round2(100 * clamp((float64(v)-low)/(1-low), 0, 1))
	}
	return &bar{From: at(i.Lower), To: at(i.Upper), At: at(i.Estimate), Low: standsLow}
}

// shareBar is a bar of length share over the longest.
func shareBar(share, longest reports.Number) *bar {
	if !share.Valid() || !longest.Valid() || longest <= 0 {
		return nil
	}
	return &bar{To: round2(100 * clamp(float64(share/longest), 0, 1)), At: -1, Plain: true}
}

// Width is the length of the bar's body.
func (b bar) Width() float64 { return round2(b.To - b.From) }

func clamp(v, low, high float64) float64 { return max(low, min(high, v)) }

func round2(v float64) float64 {
	f, _ := strconv.ParseFloat(strconv.FormatFloat(v, 'f', 2, 64), 64)
	return f
}
