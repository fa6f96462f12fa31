package rehearse

import (
	"slices"
	"sort"

	"kneepoint/ingest/synth"
	"kneepoint/reports/causes"
	"kneepoint/stats/yield"
)

// Share is a proportion of lots with its 95 % interval (Wilson).
type Share struct {
	Lots  int     `json:"lots"`
	Right int     `json:"right"`
	Lower float64 `json:"lower"`
	Upper float64 `json:"upper"`
}

// Estimate is the share; 0 of no lots.
func (s Share) Estimate() float64 { return float64(s.Right) / float64(max(s.Lots, 1)) }

func share(right, lots int) Share {
	if lots == 0 {
		return Share{Upper: 1}
	}
	iv := yield.Wilson(right, lots, 0.95)
	return Share{lots, right, iv.Lower, iv.Upper}
}

// shareOf counts the outcomes that match, among those that are of interest.
func shareOf(all []Outcome, of, match func(*Outcome) bool) Share {
	n, k := 0, 0
	for i := range all {
		if of(&all[i]) {
			n++
			if match(&all[i]) {
				k++
			}
		}
	}
	return share(k, n)
}

// Confusion counts lots of one cause, healthy ones and unexplained ones, by what was
// there and what was named first.
type Confusion struct {
	Causes []string `json:"causes"` // of rows and columns
	Counts [][]int  `json:"counts"` // [there][named]
}

func confuse(all []Outcome) Confusion {
	var c Confusion
	for _, e := range synth.Catalogue() {
		c.Causes = append(c.Causes, e.ID)
	}
	for i := range all { // a site's own causes may be named
		if n := all[i].Named; !slices.Contains(c.Causes, n) && n != causes.Nothing && n != causes.Unknown {
			c.Causes = append(c.Causes, n)
		}
	}
	c.Causes = append(c.Causes, causes.Unknown, causes.Nothing)
	at := map[string]int{}
	for i, id := range c.Causes {
		at[id] = i
		c.Counts = append(c.Counts, make([]int, len(c.Causes)))
	}
	for i := range all {
		if o := &all[i]; o.Kind != Pair {
			c.Counts[at[o.First()]][at[o.Named]]++
		}
	}
	return c
}

// Bin is one of the equal-count bins of a reliability diagram.
type Bin struct {
	Told float64 `json:"told"` // mean probability of the first cause
	Share
}

// Reliability says how often a told probability held.
type Reliability struct {
	Bins []Bin `json:"bins"`
	// Error is the expected calibration error: the mean over lots of how far the
	// told probability and the share of right ones of its bin lie apart.
	Error float64 `json:"error"`
}

const reliabilityBins = 10

// reliability sorts lots by the probability of the first cause into ten bins of
// equal counts.
func reliability(all []Outcome) Reliability {
	sorted := slices.Clone(all)
	sort.SliceStable(sorted, func(a, b int) bool { return sorted[a].Probability < sorted[b].Probability })
	var r Reliability
	n := len(sorted)
	for b := range reliabilityBins {
		bin := sorted[b*n/reliabilityBins : (b+1)*n/reliabilityBins]
		if len(bin) == 0 {
			continue
		}
		told, right := 0.0, 0
		for i := range bin {
			told += bin[i].Probability
			if bin[i].Right() {
				right++
			}
		}
		told /= float64(len(bin))
		s := share(right, len(bin))
		r.Bins = append(r.Bins, Bin{told, s})
		if gap := told - s.Estimate(); gap > 0 {
			r.Error += gap * float64(len(bin)) / float64(n)
		} else {
			r.Error -= gap * float64(len(bin)) / float64(n)
		}
	}
	return r
}

// AlikePair are two causes whose directions over the product's tests cannot be told
// apart.
type AlikePair struct {
	A      string  `json:"a"`
	B      string  `json:"b"`
	Cosine float64 `json:"cosine"` // median over lots
	Lots   Share   `json:"lots"`   // in which the whitened cosine is 0.95 or more
}

// alikePairs collects what the lots said of their tests; a pair counts when half of
// the lots say so.
func alikePairs(all []Outcome) []AlikePair {
	type key struct{ a, b string }
	seen := map[key][]float64{}
	for i := range all {
		for _, a := range all[i].alike {
			seen[key{a.A, a.B}] = append(seen[key{a.A, a.B}], a.Cosine)
		}
	}
	var out []AlikePair
	for k, cos := range seen {
		if 2*len(cos) >= len(all) {
			sort.Float64s(cos)
			out = append(out, AlikePair{k.a, k.b, cos[len(cos)/2], share(len(cos), len(all))})
		}
	}
	sort.Slice(out, func(i, j int) bool {
		if out[i].A != out[j].A {
			return out[i].A < out[j].A
		}
		return out[i].B < out[j].B
	})
	return out
}

// Confused is one wrong naming that happened at least twice.
type Confused struct {
	There string `json:"there"`
	Named string `json:"named"`
	Lots  int    `json:"lots"`
	Of    int    `json:"of"`
	// Seeds are of some of the lots: synth makes them again.
	Examples []uint64 `json:"examples"`
}

func (c *Confusion) worst(all []Outcome) []Confused {
	var out []Confused
	for i, row := range c.Counts {
		of := 0
		for _, n := range row {
			of += n
		}
		for j, n := range row {
			if i == j || n < 2 {
				continue
			}
			w := Confused{There: c.Causes[i], Named: c.Causes[j], Lots: n, Of: of}
			for k := range all {
				if o := &all[k]; o.Kind != Pair && o.First() == w.There && o.Named == w.Named && len(w.Examples) < 3 {
					w.Examples = append(w.Examples, o.Seed)
				}
			}
			out = append(out, w)
		}
	}
	sort.SliceStable(out, func(a, b int) bool { return out[a].Lots > out[b].Lots })
	return out
}
