package junction

import (
	"fmt"
	"math"
)

// Shape is the shape of an abrupt junction.
type Shape int

// The shapes of an abrupt junction: flat, along a straight mask edge, at a corner.
const (
	Plane Shape = iota
	Cylinder
	Sphere
)

// Abrupt is a one-sided junction on uniform n-type silicon at 300 K: the field of
// all closed forms, solved by the ionisation integral instead.
type Abrupt struct {
	Doping float64 // of the n side, cm^-3
	Width  float64 // cm to an n+ layer; plane only; 0 or +Inf: without end
	Shape  Shape
	Radius float64 // of the junction, cm; cylinder and sphere
}

// AbruptBreakdown is an abrupt junction's state at a level of the ionisation
// integral. Potential is the total one, applied reverse bias and built-in.
type AbruptBreakdown struct {
	Potential    float64 // V
	Field        float64 // peak, V/cm
	Depletion    float64 // of the n side, cm
	ReachThrough bool    // the n+ layer limits the depletion
}

// Breakdown returns the state at avalanche breakdown. An error says what of the
// junction is outside 1e13 to 1e18 cm^-3 or above-zero lengths.
//
// Source of the ionisation law: van Overstraeten and de Man 1970. Below 20 V (above
// 5e16 cm^-3) the value checks code, it is not physics: see [ClosedMaxDoping].
func (a Abrupt) Breakdown() (AbruptBreakdown, error) { return a.at(1) }

// OpenBase returns the state at which an open-base transistor of gain hFE breaks
// down: alpha0 Mn = 1, so that the integral for electrons is 1/(1+hFE).
func (a Abrupt) OpenBase(hfe float64) (AbruptBreakdown, error) {
	if !(hfe > 0) || math.IsInf(hfe, 0) {
		return AbruptBreakdown{}, fmt.Errorf("junction: gain %g, want above 0", hfe)
	}
	return a.at(1 / (1 + hfe))
}

func (a Abrupt) at(level float64) (AbruptBreakdown, error) {
	if err := a.check(); err != nil {
		return AbruptBreakdown{}, err
	}
	law := overstraeten(RoomTemperature, 1)
	return a.solve(func(peak float64) float64 {
		m := multiplier{law: &law}
		a.walk(peak, m.start, m.panel)
		return math.Log(m.sum / level)
	}), nil
}

// fulop is Breakdown under Fulop's coefficient, whose integral needs no nesting.
func (a Abrupt) fulop() AbruptBreakdown {
	return a.solve(func(peak float64) float64 {
		sum, f0 := 0.0, 0.0
		a.walk(peak,
			func(e float64) { f0 = fulopRate(e) },
			func(h, middle, end float64) {
				f2 := fulopRate(end)
				sum += h / 6 * (f0 + 4*fulopRate(middle) + f2)
				f0 = f2
			})
		return math.Log(sum)
	})
}

func (a Abrupt) check() error {
	switch {
	case !(a.Doping >= 1e13 && a.Doping <= 1e18):
		return fmt.Errorf("junction: doping %g cm^-3, want 1e13 to 1e18", a.Doping)
	case a.Shape != Plane && !(a.Radius > 0):
		return fmt.Errorf("junction: radius %g cm, want above 0", a.Radius)
	case a.Shape == Plane && !(a.Width >= 0):
		return fmt.Errorf("junction: width %g cm, want above 0", a.Width)
	}
	return nil
}

// solve finds the peak field at which f, rising with it, is zero.
func (a Abrupt) solve(f func(peak float64) float64) AbruptBreakdown {
	lo, hi := 8e4, 2e5
	for f(hi) < 0 {
		hi *= 1.5
	}
	for f(lo) > 0 {
		lo /= 1.5
	}
	peak := root(f, lo, hi, 1e-10)
	out := AbruptBreakdown{Field: peak}
	out.Depletion, out.ReachThrough = a.end(peak)
	e0 := peak
	a.walk(peak, func(float64) {}, func(h, middle, end float64) {
		out.Potential += h / 6 * (e0 + 4*middle + end)
		e0 = end
	})
	return out
}

// end is the depletion width at a peak field, cm, and whether the n+ layer ends it.
func (a Abrupt) end(peak float64) (float64, bool) {
	k := charge * a.Doping / permittivity
	switch a.Shape {
	case Cylinder: // rj Em = k (r^2 - rj^2)/2
		return math.Sqrt(a.Radius*a.Radius+2*a.Radius*peak/k) - a.Radius, false
	case Sphere: // rj^2 Em = k (r^3 - rj^3)/3
		return math.Cbrt(a.Radius*a.Radius*(a.Radius+3*peak/k)) - a.Radius, false
	}
	if w := peak / k; a.Width == 0 || w <= a.Width {
		return w, false
	}
	return a.Width, true
}

// walk passes the field at the start, then every panel's length and its field at
// middle and end, from the junction outwards.
func (a Abrupt) walk(peak float64, start func(field float64), panel func(h, middle, end float64)) {
	const panels = 300
	k := charge * a.Doping / permittivity
	depth, _ := a.end(peak)
	rj := a.Radius
	field := func(s float64) float64 { return math.Max(0, peak-k*s) }
	switch a.Shape {
	case Cylinder:
		field = func(s float64) float64 { return math.Max(0, (rj*peak-k*s*(rj+s/2))/(rj+s)) }
	case Sphere:
		field = func(s float64) float64 {
			r := rj + s
			return math.Max(0, (rj*rj*peak-k*(r*r*r-rj*rj*rj)/3)/(r*r))
		}
	}
	at := func(i float64) float64 { return depth * i / panels }
	if a.Shape != Plane { // panels grow with the radius
		ratio := math.Log1p(depth / rj)
		at = func(i float64) float64 { return rj * math.Expm1(ratio*i/panels) }
	}
	start(field(0))
	s0 := 0.0
	for i := 1; i <= panels; i++ {
		s := at(float64(i))
		panel(s-s0, field((s+s0)/2), field(s))
		s0 = s
	}
}
