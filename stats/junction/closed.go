package junction

import "math"

// Ranges in which the closed forms hold. Outside them the functions return NaN.
const (
	// ClosedMinDoping and ClosedMaxDoping, cm^-3, for the plane forms. Above it
	// (below about 20 V) dead space and tunnelling rule, not local ionisation.
	ClosedMinDoping, ClosedMaxDoping = 1e14, 5e16
	// CurvatureMaxEta bounds Baliga and Ghandhi's forms in rj/Wc: the cylinder's
	// peaks at 0.654 (eta 1.38) and then falls, the sphere's passes 1 at 4.05.
	CurvatureMaxEta = 0.5
	// ReachThroughMinShare bounds the constant-critical-field form for epi that is
	// depleted to the substrate, in W/Wc: it reads 35 % low at 1 um and 1e14.
	ReachThroughMinShare = 0.5
	// MillerMin and MillerMax bound Miller's exponent for silicon.
	MillerMin, MillerMax = 2.0, 6.0
)

func inRange(n float64) bool { return n >= ClosedMinDoping && n <= ClosedMaxDoping }

// BaligaBreakdown returns the breakdown potential in V of an abrupt one-sided plane
// junction on n cm^-3: 5.34e13 n^-0.75. NaN outside ClosedMinDoping to
// ClosedMaxDoping. Against the ionisation integral: +20 % at 1e14 to 1e15, +13 %
// at 3e15, +2 % at 1e16, -14 % at 3e16.
//
// Source: Baliga's textbooks, from Fulop's coefficient; constants from memory.
func BaligaBreakdown(n float64) float64 { return guarded(n, baligaBreakdown) }

// BaligaWidth returns the depletion width at that breakdown in cm: 2.67e10 n^-0.875.
func BaligaWidth(n float64) float64 { return guarded(n, baligaWidth) }

// BaligaField returns the critical field in V/cm: 4010 n^0.125.
func BaligaField(n float64) float64 { return guarded(n, baligaField) }

// SzeGibbonsBreakdown returns 60 V (n/1e16)^-0.75, the plane junction's breakdown
// potential in silicon. NaN outside the range of the closed forms. Against the
// integral: +34 % at 1e15, +14 % at 1e16.
//
// Source: Sze and Gibbons, Appl. Phys. Lett. 8 (1966) 111, with Eg = 1.1 eV; from
// memory.
func SzeGibbonsBreakdown(n float64) float64 { return guarded(n, szeGibbonsBreakdown) }

// FulopBreakdown returns the exact breakdown potential in V under Fulop's
// coefficient of a plane junction on n cm^-3 of thickness w cm before an n+
// layer; w = +Inf for epi without end. NaN outside the range of the closed forms
// or for w not above 0. In reach-through it is within -0.3 to +12 % of the
// integral (w up to 12 um, n up to 1e16).
//
// Source: Fulop, Solid-State Electron. 10 (1967) 39.
func FulopBreakdown(n, w float64) float64 {
	if !inRange(n) || !(w > 0) {
		return math.NaN()
	}
	return fulopBreakdown(n, w)
}

// BaligaReachThrough returns Ec W - qNW^2/2eps with Baliga's critical field, and his
// plane value once w is past his width. NaN when w is below half that width.
func BaligaReachThrough(n, w float64) float64 {
	if !inRange(n) || !(w >= ReachThroughMinShare*baligaWidth(n)) {
		return math.NaN()
	}
	return baligaReachThrough(n, w)
}

// BaligaGhandhiCylinder returns the breakdown of a cylindrical junction over the
// plane one at eta = rj/Wc; NaN above CurvatureMaxEta. Against its own (Fulop)
// numerics -4 to +3 %, against the van Overstraeten ratio -9 to -30 %.
//
// Source: Baliga and Ghandhi, Solid-State Electron. 19 (1976) 739; from memory.
func BaligaGhandhiCylinder(eta float64) float64 { return curvature(eta, baligaGhandhiCylinder) }

// BaligaGhandhiSphere is [BaligaGhandhiCylinder] for a sphere: -1 to +2 % against
// its own numerics, -11 to -44 % against van Overstraeten's.
func BaligaGhandhiSphere(eta float64) float64 { return curvature(eta, baligaGhandhiSphere) }

// SzeGibbonsCylinder returns the same ratio by Sze and Gibbons:
// sqrt((2+eta) eta) - eta. It has the right limits for every eta above 0.
func SzeGibbonsCylinder(eta float64) float64 {
	if !(eta > 0) {
		return math.NaN()
	}
	return math.Sqrt((2+eta)*eta) - eta
}

// SzeGibbonsSphere is ((3+eta) eta^2)^(1/3) - eta.
func SzeGibbonsSphere(eta float64) float64 {
	if !(eta > 0) {
		return math.NaN()
	}
	return math.Cbrt((3+eta)*eta*eta) - eta
}

// MillerBVceo returns plane (1+hFE)^(-1/n), the open-base breakdown potential from
// the PLANE junction's (never the measured, edge-limited BVcbo: with it the
// exponent of a healthy part would come out above 20). NaN for an exponent outside
// MillerMin to MillerMax: it is 2.6 to 3.8 in thick epi and up to 5.2 in
// reach-through, no constant of a process.
//
// Source: Miller, Phys. Rev. 105 (1957) 1246.
func MillerBVceo(plane, hfe, n float64) float64 {
	if !(n >= MillerMin && n <= MillerMax) || !(hfe > 0) {
		return math.NaN()
	}
	return plane * math.Pow(1+hfe, -1/n)
}

// MillerExponent returns the exponent that takes the plane breakdown potential to
// the open-base one; NaN when no positive one does.
func MillerExponent(plane, bvceo, hfe float64) float64 {
	if !(bvceo > 0 && plane > bvceo && hfe > 0) {
		return math.NaN()
	}
	return math.Log1p(hfe) / math.Log(plane/bvceo)
}

func guarded(n float64, f func(float64) float64) float64 {
	if !inRange(n) {
		return math.NaN()
	}
	return f(n)
}

func curvature(eta float64, f func(float64) float64) float64 {
	if !(eta > 0 && eta <= CurvatureMaxEta) {
		return math.NaN()
	}
	return f(eta)
}

// The formulas themselves, for checks outside the range in which they are physics.

func baligaBreakdown(n float64) float64     { return 5.34e13 * math.Pow(n, -0.75) }
func baligaWidth(n float64) float64         { return 2.67e10 * math.Pow(n, -0.875) }
func baligaField(n float64) float64         { return 4010 * math.Pow(n, 0.125) }
func szeGibbonsBreakdown(n float64) float64 { return 60 * math.Pow(n/1e16, -0.75) }

func baligaReachThrough(n, w float64) float64 {
	if w >= baligaWidth(n) {
		return baligaBreakdown(n)
	}
	return baligaField(n)*w - charge*n*w*w/(2*permittivity)
}

func baligaGhandhiCylinder(eta float64) float64 {
	p := math.Pow(eta, 6.0/7)
	return (eta*eta+2*p)/2*math.Log(1+2*math.Pow(eta, -8.0/7)) - p
}

func baligaGhandhiSphere(eta float64) float64 {
	// The bracket's 3 is as printed; derived from Fulop it is 3.21.
	b := eta*eta*eta + 3*math.Pow(eta, 13.0/7)
	return eta*eta + 2.14*math.Pow(eta, 6.0/7) - math.Cbrt(b*b)
}

func fulopBreakdown(n, w float64) float64 {
	k := charge * n / permittivity
	// integral of 1.8e-35 E^7 from 0 to w is 1.8e-35 (Em^8 - Ew^8)/8k
	em := math.Pow(8*k/1.8e-35, 1.0/8)
	if em/k <= w {
		return em * em / (2 * k)
	}
	f := func(e float64) float64 {
		return math.Log(1.8e-35/(8*k)*math.Pow(e, 8)) + math.Log1p(-math.Pow(1-k*w/e, 8))
	}
	hi := em
	for f(hi) < 0 {
		hi *= 1.5
	}
	e := root(f, em, hi, 1e-12)
	return e*w - k*w*w/2
}
