package ingest

import (
	"fmt"
	"regexp"
	"strings"
)

// summaryWords stand in key columns of rows under a table that sum it up.
// Common practice, no source.
var summaryWords = set("sum", "summe", "total", "totals", "grandtotal", "gesamt", "gesamtsumme", "mean", "average", "avg", "mittel", "mittelwert", "durchschnitt",
	"median", "std", "stddev", "stdev", "standarddeviation", "sigma", "min", "minimum", "max", "maximum", "count", "anzahl", "range")

func isSummary(k groupKey) bool {
	return summaryWords[plainName(k.wafer)] || summaryWords[plainName(k.lot)]
}

// unplaced says whether none of the rows has a coordinate.
func (c *chunk) unplaced(lo, hi int) bool {
	for _, slot := range []int{intX, intY} {
		if c.ints[slot] == nil {
			continue
		}
		for _, v := range c.ints[slot][lo:hi] {
			if v != Missing {
				return false
			}
		}
	}
	return true
}

// numbered matches wafer ids that are a number: 1, 01, 1.0, W01.
var numbered = regexp.MustCompile(`^[wW]?0*([0-9]+)(?:\.0+)?$`)

// sameWafers merges the wafers of a lot whose ids are the same number written in
// several ways. The spelling of most rows stays, the first of equals.
func (t *readings) sameWafers(k *rowKeys) {
	into := map[groupKey][]int32{} // groups by lot and number
	var order []groupKey
	for g, key := range k.groups {
		if m := numbered.FindStringSubmatch(key.wafer); m != nil {
			key.wafer = m[1]
			if into[key] == nil {
				order = append(order, key)
			}
			into[key] = append(into[key], int32(g))
		}
	}
	to := make([]int32, len(k.groups))
	for g := range to {
		to[g] = int32(g)
	}
	var texts []string
	for _, key := range order {
		same := into[key]
		if len(same) < 2 {
			continue
		}
		best := same[0]
		for _, g := range same {
			if k.counts[g] > k.counts[best] {
				best = g
			}
		}
		var spellings []string
		for _, g := range same {
			to[g] = best
			spellings = append(spellings, quote(k.groups[g].wafer))
		}
		texts = append(texts, strings.Join(spellings, " and "))
	}
	if len(texts) == 0 {
		return
	}
	merged := rowKeys{runs: k.runs}
	place := make([]int32, len(k.groups))
	for g := range k.groups {
		if to[g] == int32(g) {
			place[g] = int32(len(merged.groups))
			merged.groups = append(merged.groups, k.groups[g])
			merged.counts, merged.rows = append(merged.counts, 0), append(merged.rows, 0)
		}
	}
	for g := range k.groups {
		at := place[to[g]]
		merged.counts[at] += k.counts[g]
		merged.rows[at] += k.rows[g]
	}
	for i, r := range merged.runs {
		if r.group >= 0 {
			merged.runs[i].group = place[to[r.group]]
		}
	}
	*k = merged
	t.note(all, Info, "wafer-ids-merged", fmt.Sprintf("%d %s written in several ways and taken as one: %s", len(texts), plural(len(texts), "wafer id is", "wafer ids are"), list(texts, 8)), "", 0)
}
