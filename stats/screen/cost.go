package screen

import (
	"kneepoint/stats"
	"kneepoint/stats/yield"
)

// Cost is what a screen takes.
type Cost struct {
	Name string
	// Good is the number of passing dice, Screened how many of them are flagged, and
	// Extra how many that no screen before it in the list flags.
	Good, Screened, Extra int
	// Failing is the number of flagged dice that fail a limit anyway.
	Failing int
	// Share is Screened over Good, with Wilson's interval (counting only: dice of one
	// wafer share their fate, and from lot to lot it varies more).
	Share stats.Interval
}

// Screen is a screen's flags, one a die.
type Screen struct {
	Name string
	Flag []bool
}

// CostOf is the cost of one screen; pass says which dice pass. It panics when
// lengths differ or on a confidence outside (0, 1).
func CostOf(s Screen, pass []bool, confidence float64) Cost {
	return Costs([]Screen{s}, pass, confidence)[0]
}

// Costs are the costs of several screens and, last, of all of them together,
// under the name "all screens".
func Costs(screens []Screen, pass []bool, confidence float64) []Cost {
	out := make([]Cost, 0, len(screens)+1)
	taken := make([]bool, len(pass))
	for _, s := range screens {
		if len(s.Flag) != len(pass) {
			panic("stats/screen: slice length mismatch")
		}
		c := Cost{Name: s.Name}
		for i, f := range s.Flag {
			switch {
			case f && pass[i]:
				c.Screened++
				if !taken[i] {
					c.Extra++
				}
			case f:
				c.Failing++
			}
			taken[i] = taken[i] || f
		}
		out = append(out, c)
	}
	all := Cost{Name: "all screens"}
	good := 0
	for i, p := range pass {
		if p {
			good++
		}
		switch {
		case taken[i] && p:
			all.Screened++
		case taken[i]:
			all.Failing++
		}
	}
	all.Extra = all.Screened
	out = append(out, all)
	for i := range out {
		out[i].Good = good
		out[i].Share = yield.Wilson(out[i].Screened, good, confidence)
	}
	return out
}
