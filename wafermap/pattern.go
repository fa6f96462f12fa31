package wafermap

import "math"

// shape is the kind of place that a pattern takes on the wafer. Several shapes may
// have the same name in a Signature.
type shape int

const (
	shapeRing shape = iota
	shapeArc
	shapeCentre
	shapeAnnulus
	shapeLine
	shapeBlob
	shapeRamp
	shapeSector
	shapeShot
	shapeComb // periodic along one axis: sites side by side that the file does not tell
	shapeBand // rows or columns of the grid
	shapeSite
	shapeOrder // a stretch of the test order
	shapes_
)

var shapeKind = [shapes_]string{"edge-ring", "edge-arc", "centre", "annulus", "line", "blob", "gradient", "sector", "shot-repeat", "site", "stripe", "site", "stripe"}

// pattern is a place that fails more than the model so far expects, with the
// evidence for it.
type pattern struct {
	shape
	cu, cv, a, b, angle float64 // blob, centre: ellipse. annulus, ring: centre, inner a, outer b
	theta, width        float64 // arc, sector: middle and width in radians; arc: inner radius a. ramp: direction theta
	line                path
	periodX, periodY    int   // shot, comb: in dice
	cells               []int // y*periodX + x
	axis                int   // band: 0 rows, 1 columns
	from, to            int   // band, order: first and one after last
	sites               []int32

	start spotlight // line, shot, comb: what it was fitted from

	tally
	gain  float64 // log-likelihood ratio
	cost  float64 // logarithm of the number of places of this size that were looked at, about
	p     float64 // chance that the best place of any shape does as well on a wafer without
	told  bool    // whether that is small enough to tell it
	net   float64 // gain less the price of having looked for it
	named float64 // net of depth and freedom, by which shapes are compared
}

// climb looks for the highest value by steps along one coordinate at a time, halved when
// none helps. It changes x and step and returns the value reached.
func climb(x, step []float64, halvings int, value func([]float64) float64) float64 {
	best := value(x)
	for range halvings {
		for moved, turns := true, 0; moved && turns < 4; turns++ {
			moved = false
			for i := range x {
				if step[i] == 0 {
					continue
				}
				old := x[i]
				for _, sign := range [2]float64{1, -1} {
					x[i] = old + sign*step[i]
					if v := value(x); v > best {
						best, moved = v, true
						step[i] *= sign // next time this way first
						break
					}
					x[i] = old
				}
			}
		}
		for i := range step {
			step[i] /= 2
		}
	}
	return best
}

// shortlist keeps the best few of many places, no two of them near each other.
type shortlist struct {
	most  int
	items []spotlight
}

type spotlight struct {
	value float64
	x     [6]float64
}

// floor is the value that a place must pass to get on a full list.
func (l *shortlist) floor() float64 {
	if len(l.items) < l.most {
		return math.Inf(-1)
	}
	return l.items[len(l.items)-1].value
}

func (l *shortlist) offer(value float64, x [6]float64, near func(a, b [6]float64) bool) {
	for i := range l.items {
		if near(l.items[i].x, x) {
			if value <= l.items[i].value {
				return
			}
			l.items = append(l.items[:i], l.items[i+1:]...)
			break
		}
	}
	i := len(l.items)
	for i > 0 && l.items[i-1].value < value {
		i--
	}
	if i >= l.most {
		return
	}
	if len(l.items) < l.most {
		l.items = append(l.items, spotlight{})
	}
	copy(l.items[i+1:], l.items[i:])
	l.items[i] = spotlight{value, x}
}
