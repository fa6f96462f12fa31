package wafermap

import (
	"cmp"
	"math"
	"slices"
)

// SignatureInput is one wafer's fails and what else is known of its dice. Slices have one
// element a row of the grid.
type SignatureInput struct {
	Grid     *Grid
	Geometry Geometry
	Fail     []bool

	// Site names each row's test site and Order the touchdown it was tested in, ascending in
	// time; dice tested at once share one. Missing where a row's is not known, nil where none is.
	Site, Order []int32
	// ShotColumns and ShotRows are the dice of one exposure; 0 when not known.
	ShotColumns, ShotRows int
}

// Signature is one pattern of fails on a wafer.
type Signature struct {
	// Kind is one of edge-ring, edge-arc, centre, annulus, line, blob, gradient, sector,
	// shot-repeat, site, stripe, near-total, random, none; see Signatures.
	Kind string

	Strength   float64 // share of the failing dice that fail because of it: Loss over the fail rate
	Loss       float64 // share of the tested dice lost to it, beyond background and other patterns
	Cover      float64 // share of the tested dice inside its outline
	Rate       float64 // fail rate inside the outline
	Background float64 // fail rate that would be there without it
	// PValue is the chance that a wafer without patterns, or without any but the others
	// found, shows a place of any shape that stands out as much. Below about 0.0003 it is
	// extrapolated.
	PValue  float64
	Outline Outline
	Dice    []int32 // failing rows inside the outline
}

// Point is a place on the wafer: lengths from its centre in the geometry's unit, y up.
type Point struct{ X, Y float64 }

// Outline says where on the wafer a signature lies. Lengths are in the geometry's unit
// from the wafer's centre (in die widths from the middle of the dice's box where the
// geometry is not known), angles in degrees counter-clockwise from +x, y up. Fields that
// a kind has no use for are zero.
type Outline struct {
	Centre               Point   // edge-ring, centre, annulus, blob
	Inner, Outer         float64 // radii about Centre: edge-ring, annulus; edge-arc: about the wafer's centre
	SemiMajor, SemiMinor float64 // centre, blob
	Angle                float64 // of the major axis, 0 to 180
	From, To             float64 // edge-arc, sector: counter-clockwise from From (0 to 360) to To (up to 720)
	Ends                 [2]Point
	Middle               Point   // line: where it bows to
	Width                float64 // line
	Direction            float64 // gradient: where the fail rate rises to, 0 to 360
	Low, High            float64 // gradient: fail rates at its two ends

	// Shot-repeat, and site where the sites are not recorded: periods in dice (1: not
	// periodic that way) and the places that fail, each by the first die coordinates x, y at or
	// after those of the grid's corner.
	PeriodX, PeriodY int
	Places           [][2]int

	Sites []int32 // site
	// Stripe: what First and Last count, "touchdown", "row" (die y) or "column" (die x).
	Along       string
	First, Last int
}

const (
	fewestFails  = 3    // with fewer, nothing can be said
	judgedFails  = 6    // with fewer and no pattern, the kind is none instead of random
	nearTotal    = 0.75 // fail rate from which a wafer without patterns is near-total
	hardlyAny    = 0.9  // and from which no patterns are looked for
	smallestP    = 1e-300
	insideLayers = 6 // layers up to the outline
)

// Signatures finds the patterns in a wafer's fails, those that cost most dice first:
//
//   - edge-ring, edge-arc: from some radius out to the edge, all round or in part
//   - centre, annulus: a disc at the wafer's centre; a ring that does not reach the edge
//   - blob: a disc or ellipse elsewhere
//   - line: straight or gently bowed
//   - gradient, sector: a rate that rises across the wafer; a slice of the cake
//   - shot-repeat: the same places of each exposure; periods are found when not given
//   - site: the dice of one or a few test sites, or where sites are not recorded, every
//     few columns or rows
//   - stripe: a stretch of the test order, or of whole rows or columns
//   - near-total: three dice in four fail or more, and no pattern leaves the rest good
//   - random: fails without structure; none: too few fails to judge
//
// # Method
//
// For each shape a bank of places of all sizes is compared with the dice's counts by the
// log-likelihood ratio of the Bernoulli scan statistic (Kulldorff 1997, Commun. Stat. Theory
// Methods 26, 1481), the best are fitted more finely, and the number of places of that size
// is taken off (Walther 2010, Ann. Stat. 38, 1010). What chance reaches is known from simulated
// random wafers (chanceTable); a pattern is told when a random wafer shows any as
// strong once in a hundred times. Among shapes that compete for the same fails
// the one with the highest likelihood, its rate falling with depth, less the price of its free
// parameters (Schwarz 1978) gives the name. The rates of all patterns found are then fitted
// together, fails that exceed these are searched again, and so on until nothing stands out;
// where patterns overlap each is looked for again with the others known. Remainders of an
// outline that was not quite the shape's are counted to it and not told as patterns.
//
// It works from counts by cells, and takes some tens of milliseconds for 88,000 dice.
func Signatures(in SignatureInput) []Signature {
	in.Grid.check(len(in.Fail))
	if in.Site != nil {
		in.Grid.check(len(in.Site))
	}
	if in.Order != nil {
		in.Grid.check(len(in.Order))
	}
	f := newField(in)
	if f.total.o < fewestFails {
		return []Signature{f.without("none", nan)}
	}
	if f.mean >= hardlyAny {
		return []Signature{f.without("near-total", f.mostChance())}
	}
	found, p := f.search()
	if f.mean >= nearTotal && (len(found) == 0 || f.refit(found).base >= 0.8*nearTotal) {
		return []Signature{f.without("near-total", f.mostChance())}
	}
	if len(found) == 0 {
		if f.total.o < judgedFails {
			return []Signature{f.without("none", p)}
		}
		return []Signature{f.without("random", p)}
	}
	return f.signatures(found)
}

// ValueSignatures finds patterns in where a value is unusually high and unusually low: of
// the dice with a value, the given share (0.1 is usual) at either end counts as fails
// of a map each. Made for residuals of a Surface, where gradients and bowls are gone.
func ValueSignatures(in SignatureInput, value []float64, share float64) (high, low []Signature) {
	in.Grid.check(len(value))
	var rows []int32
	for _, r := range in.Grid.order {
		if !math.IsNaN(value[r]) {
			rows = append(rows, r)
		}
	}
	pick := func(v []int32) []int32 {
		if v == nil {
			return nil
		}
		out := make([]int32, len(rows))
		for i, r := range rows {
			out[i] = v[r]
		}
		return out
	}
	sorted := make([]float64, len(rows))
	for i, r := range rows {
		sorted[i] = value[r]
	}
	slices.Sort(sorted)
	end := int(share * float64(len(rows)))
	if !(share > 0 && share < 1) || end == 0 {
		return []Signature{{Kind: "none", PValue: nan}}, []Signature{{Kind: "none", PValue: nan}}
	}
	part := SignatureInput{Grid: NewGrid(pick(in.Grid.x), pick(in.Grid.y)), Geometry: in.Geometry, Site: pick(in.Site), Order: pick(in.Order),
		ShotColumns: in.ShotColumns, ShotRows: in.ShotRows}
	find := func(extreme func(v float64) bool) []Signature {
		part.Fail = make([]bool, len(rows))
		for i, r := range rows {
			part.Fail[i] = extreme(value[r])
		}
		found := Signatures(part)
		for _, s := range found {
			for k, i := range s.Dice {
				s.Dice[k] = rows[i]
			}
		}
		return found
	}
	top, bottom := sorted[len(sorted)-end], sorted[end-1]
	return find(func(v float64) bool { return v >= top }), find(func(v float64) bool { return v <= bottom })
}

// without is the signature of a wafer without patterns.
func (f *field) without(kind string, p float64) Signature {
	s := Signature{Kind: kind, PValue: p}
	if f.total.n == 0 {
		return s
	}
	s.Loss, s.Rate, s.Cover = f.mean, f.mean, 1
	if f.total.o > 0 {
		s.Strength = 1
	}
	for _, i := range f.failing {
		s.Dice = append(s.Dice, f.rows[i])
	}
	return s
}

// mostChance bounds the chance of as many fails if half of the dice failed (Chernoff 1952).
func (f *field) mostChance() float64 {
	return max(smallestP, math.Exp(-side(tally{f.total.o, f.total.n, f.total.n / 2})))
}

// signatures says what each pattern of a model is.
func (f *field) signatures(found []*explained) []Signature {
	m := f.mix(found)
	t := f.fitMixture(m)
	loss := make([]float64, len(found))
	rate, without := t.rates(m, -1), make([][]float64, len(found))
	for k := range found {
		without[k] = t.rates(m, k)
		for c, n := range m.n {
			loss[k] += n * (rate[c] - without[k][c]) / f.total.n
		}
	}
	for k, x := range found {
		if x.hidden {
			j := x.mends
			for found[j].hidden { // each mends one with more evidence
				j = found[j].mends
			}
			loss[j] += loss[k]
		}
	}
	var out []Signature
	for k, x := range found {
		if x.hidden {
			continue
		}
		s := Signature{Kind: f.kind(x.pattern), PValue: max(x.p, smallestP), Loss: max(0, loss[k]), Outline: f.outline(x, m, rate)}
		s.Strength = min(1, s.Loss/f.mean)
		dice, fails := 0.0, 0.0
		for i, d := range x.depth {
			if d >= insideLayers {
				continue
			}
			dice++
			s.Background += without[k][m.kind[i]]
			if f.fail[i] {
				fails++
				s.Dice = append(s.Dice, f.rows[i])
			}
		}
		if dice > 0 {
			s.Cover, s.Rate = dice/f.total.n, fails/dice
			s.Background /= dice
		}
		out = append(out, s)
	}
	slices.SortStableFunc(out, func(a, b Signature) int { return cmp.Compare(b.Loss, a.Loss) })
	return out
}
