package wafermap

import (
	"cmp"
	"slices"
)

// WaferFails is one wafer of a lot: one element a row in each slice.
type WaferFails struct {
	X, Y []int32
	Fail []bool
}

// Repeater is a die position that fails on more wafers than chance allows.
type Repeater struct {
	X, Y            int32
	Tested, Failing int     // wafers
	Expected        float64 // failing wafers, by the fail rates of the wafers there
	PValue          float64 // chance of as many or more
	Adjusted        float64 // PValue adjusted for the number of positions: false discovery rate
}

const (
	repeaterRings = 8
	repeaterPrior = 25 // dice of the wafer's average rate that each ring starts with
	fewestRepeats = 2  // wafers
)

// Repeaters returns the positions whose number of failing wafers is beyond chance at a
// false discovery rate of level, smallest p-value first, and the number of positions
// looked at.
//
// The chance is that of the Poisson-binomial law: on each wafer on which it was tested a
// position fails with that wafer's rate, in its own ring of eight of equal area (drawn
// towards the wafer's average where a ring has few dice), so that neither a bad wafer nor
// a bad edge makes repeaters. The tail is summed exactly. P-values are adjusted by
// Benjamini and Hochberg 1995 over all positions tested on at least two wafers. A position
// in several rows of a wafer counts once, with the last row's result.
func Repeaters(g Geometry, wafers []WaferFails, level float64) (repeaters []Repeater, positions int) {
	rates := make([][repeaterRings]float64, len(wafers))
	ring := func(x, y int32) int { return max(0, g.Ring(x, y, repeaterRings)) }
	type place struct {
		x, y    int32
		ring    int
		failing int
		tested  []bool
	}
	var places []place
	ix := (*index)(nil)
	for w, wafer := range wafers {
		grid := NewGrid(wafer.X, wafer.Y)
		grid.check(len(wafer.Fail))
		if ix == nil {
			ix = newIndex(wafer.X, wafer.Y, 2)
		}
		var dice, fails [repeaterRings]float64
		var allDice, allFails float64
		for _, r := range grid.order {
			x, y := wafer.X[r], wafer.Y[r]
			k := ix.get(int(x), int(y))
			if k < 0 {
				k = len(places)
				ix.put(int(x), int(y), int32(k))
				places = append(places, place{x: x, y: y, ring: ring(x, y), tested: make([]bool, len(wafers))})
			}
			p := &places[k]
			p.tested[w] = true
			dice[p.ring]++
			allDice++
			if wafer.Fail[r] {
				p.failing++
				fails[p.ring]++
				allFails++
			}
		}
		for z := range dice {
			if allDice > 0 {
				rates[w][z] = (fails[z] + repeaterPrior*allFails/allDice) / (dice[z] + repeaterPrior)
			}
		}
	}
	laws := map[string]*repeatLaw{} // by ring and tested wafers
	key := make([]byte, 1+(len(wafers)+7)/8)
	for _, p := range places {
		clear(key)
		key[0] = byte(p.ring)
		tested := 0
		for w, t := range p.tested {
			if t {
				key[1+w/8] |= 1 << (w % 8)
				tested++
			}
		}
		if tested < fewestRepeats {
			continue
		}
		positions++
		law := laws[string(key)]
		if law == nil {
			law = poissonBinomial(p.tested, func(w int) float64 { return rates[w][p.ring] })
			laws[string(key)] = law
		}
		repeaters = append(repeaters, Repeater{X: p.x, Y: p.y, Tested: tested, Failing: p.failing, Expected: law.mean, PValue: law.tail[p.failing]})
	}
	slices.SortFunc(repeaters, func(a, b Repeater) int {
		return cmp.Or(cmp.Compare(a.PValue, b.PValue), cmp.Compare(a.Y, b.Y), cmp.Compare(a.X, b.X))
	})
	least, keep := 1.0, 0
	for i := len(repeaters) - 1; i >= 0; i-- {
		r := &repeaters[i]
		least = min(least, r.PValue*float64(positions)/float64(i+1))
		r.Adjusted = least
		if r.Adjusted <= level && r.Failing >= fewestRepeats && keep == 0 {
			keep = i + 1
		}
	}
	return slices.Clip(slices.DeleteFunc(repeaters[:keep], func(r Repeater) bool { return r.Failing < fewestRepeats })), positions
}

// repeatLaw is the law of the number of failing wafers: its mean and P(at least k).
type repeatLaw struct {
	mean float64
	tail []float64
}

func poissonBinomial(tested []bool, rate func(w int) float64) *repeatLaw {
	p := []float64{1} // of 0, 1, 2 ... fails so far
	l := &repeatLaw{}
	for w, t := range tested {
		if !t {
			continue
		}
		q := rate(w)
		l.mean += q
		p = append(p, 0)
		for k := len(p) - 1; k > 0; k-- {
			p[k] = p[k]*(1-q) + p[k-1]*q
		}
		p[0] *= 1 - q
	}
	l.tail = make([]float64, len(p)+1)
	for k := len(p) - 1; k >= 0; k-- {
		l.tail[k] = min(1, l.tail[k+1]+p[k])
	}
	return l
}
