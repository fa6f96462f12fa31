package wafermap

import (
	"math"
)

// tally is what lies under a mask: failing dice, dice, and the fails that the model
// so far expects there.
type tally struct{ o, n, e float64 }

func (t tally) plus(u tally) tally  { return tally{t.o + u.o, t.n + u.n, t.e + u.e} }
func (t tally) minus(u tally) tally { return tally{t.o - u.o, t.n - u.n, t.e - u.e} }

// field is one wafer's fails in the forms that the searches for patterns work on:
// a raster of cells with running sums along rows and columns, and a polar table. Lengths
// are in radii of the tested disc, from its centre, v up.
type field struct {
	in    SignatureInput
	round bool // the wafer's disc is known

	*places
	fail    []bool    // by place in rows
	failing []int32   // places in rows that fail
	p       []float64 // chance that the die fails by the model so far
	total   tally
	mean    float64 // fail rate

	raster
	polar
	ordered []int32  // see inOrder
	lattice *lattice // nil until repeats are looked for
	aside   [offCentres][]tally
	chain   []link // the last model's mixture and those of its parts

	// what the last full search for the dear shapes came up with
	starts      []spotlight
	crowded     bool // lines that might be told found no place among the starts
	periods     []spotlight
	keptStarts  []spotlight // starts and periods of patterns that became part of a model
	keptPeriods []spotlight
	pending     int // dear shapes that were found and are not yet part of the model
}

// farOut is how far from the centre, in radii, a die may lie to take part: one further
// out has wrong coordinates.
const farOut = 1.12

func newField(in SignatureInput) *field {
	f := newFieldOf(in, cellsOfRaster)
	f.layPolar()
	f.polar.sum(f)
	return f
}

// newFieldOf lays the dice on a raster of at most cells cells, without a polar table.
func newFieldOf(in SignatureInput, cells int) *field {
	f := &field{in: in, round: in.Geometry.Unit != "", places: in.Grid.placesFor(in.Geometry)}
	f.fail = make([]bool, len(f.rows))
	for i, r := range f.rows {
		if in.Fail[r] {
			f.fail[i] = true
			f.failing = append(f.failing, int32(i))
		}
	}
	f.total.o, f.total.n = float64(len(f.failing)), float64(len(f.rows))
	f.mean = f.total.o / f.total.n
	f.p = make([]float64, len(f.rows))
	for i := range f.p {
		f.p[i] = f.mean
	}
	f.raster.cells = f.places.cellsFor(cells)
	f.layRaster()
	f.expect()
	return f
}

// boxGeometry stands in where no disc could be found: the circle round the box of the
// dice, in die widths.
func (g *Grid) boxGeometry() Geometry {
	b := bulk(g.x, g.y)
	w, h := float64(b.X1-b.X0+1), float64(b.Y1-b.Y0+1)
	return Geometry{DieWidthMM: 1, DieHeightMM: 1, CentreX: float64(b.X0+b.X1) / 2, CentreY: float64(b.Y0+b.Y1) / 2,
		OutlineRadius: math.Hypot(w, h) / 2, Unit: "die widths"}
}

// expect refreshes the sums of expected fails after p has changed.
func (f *field) expect() {
	e, lowest := 0.0, 1.0
	for _, p := range f.p {
		e += p
		if p < lowest {
			lowest = p
		}
	}
	f.total.e, f.lowest = e, lowest
	f.raster.sum(f)
	if f.polar.sums != nil {
		f.polar.sum(f)
	}
}

// gain is the log-likelihood ratio of a fail rate inside a mask that differs from what
// the model expects, by one factor inside and one outside, against none (Kulldorff 1997,
// Commun. Stat. Theory Methods 26, 1481, Bernoulli model; exactly that for an even
// expectation). It is 0 where there are fewer fails than expected.
func (f *field) gain(t tally) float64 {
	if t.o <= t.e || t.e <= 0 || t.n >= f.total.n {
		return 0
	}
	out := f.total.minus(t)
	out.e = max(f.total.o-t.e, 1e-9) // the model's total is that of the data
	return side(t) + side(out)
}

// side is the binomial log-likelihood ratio of o fails of n against e expected.
func side(t tally) float64 {
	l := 0.0
	if t.o > 0 {
		l = t.o * math.Log(t.o/t.e)
	}
	if pass, expected := t.n-t.o, t.n-t.e; pass > 0 && expected > 0 {
		l += pass * math.Log(pass/expected)
	}
	return l
}

// hopeless reports, without logarithms, that a mask's gain cannot reach need.
func (f *field) hopeless(t tally, need float64) bool {
	d := t.o - t.e
	if d <= 0 {
		return true
	}
	spare := 1 - t.e/t.n
	return d*d < 1.6*need*t.e*spare*(1-t.n/f.total.n)
}
