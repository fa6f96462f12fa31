package wafermap

import (
	"fmt"
	"math"
	"slices"
)

// Sizes of silicon wafers in mm: 2 and 3 inch, then metric (SEMI M1; from memory).
var standardDiameters = []float64{50.8, 76.2, 100, 125, 150, 200, 300}

const (
	// usualExclusion is the edge exclusion taken where none is given but a
	// length must come from somewhere, in mm: common practice, no source.
	usualExclusion = 3
	// widestExclusion is the most that the outline may lie inside a standard
	// wafer that is taken for it, in mm: common practice, no source.
	widestExclusion = 7

	fewestSpots = 5 // distinct positions that an outline needs
)

// FindGeometry finds the wafer under the dice of a lot: x and y are the
// coordinates of all dice of all its wafers, in any order, repeats welcome. What
// known gives is taken as it is; the rest is found from the outline of the tested
// dice, which is taken to be a circle in millimetres:
//
//   - with the die pitch and the diameter: the centre. On a partial map the
//     diameter, less the exclusion, also says how large the outline must be.
//   - with the pitch alone: the diameter is the smallest standard one that holds
//     the outline, or twice the outline's radius when none is near.
//   - with the diameter alone: the pitch, from the outline lying at the edge
//     exclusion (3 mm when that is not given).
//   - with nothing: the ratio of die height to width that makes the outline round;
//     all lengths are then in die widths, see Geometry.
//
// Missing edge dice, maps of a part of the wafer, sampled maps and a few stray
// coordinates are expected. Fewer than five distinct positions, or dice in fewer
// than three rows or columns, give no geometry.
func FindGeometry(x, y []int32, known Known) Geometry {
	none := func(why string) Geometry {
		return Geometry{DiameterMM: nan, DieWidthMM: nan, DieHeightMM: nan, EdgeExclusionMM: nan, CentreX: nan, CentreY: nan,
			OutlineRadius: nan, CentreSigma: nan, OutlineDegrees: nan, Notch: known.Notch, YDown: known.YDown, Why: why}
	}
	if _, n := span(x, y); n == 0 {
		return none("no dice with coordinates")
	}
	p, _ := spots(x, y)
	p = withoutLonely(withoutRare(p))
	ax, ay := newAxis(p, spotX), newAxis(p, spotY)
	switch {
	case len(p) < fewestSpots:
		return none(fmt.Sprintf("the dice lie on %d distinct positions: at least %d are needed to find the wafer", len(p), fewestSpots))
	case ax.distinct < 3 || ay.distinct < 3:
		return none(fmt.Sprintf("the dice lie in %d columns and %d rows: at least 3 of each are needed to find the wafer", ax.distinct, ay.distinct))
	}
	o := outline{spots: p, spacingX: float64(ax.spacing), spacingY: float64(ay.spacing), known: known}
	if !o.find() {
		return none("the tested dice have no outline that could be a wafer's")
	}
	return o.geometry()
}

// outline is the search for the circle round the tested dice.
type outline struct {
	spots              []spot
	spacingX, spacingY float64 // of a sampled map; 1 where all dice are tested
	known              Known
	w, h               float64 // pitch the fit runs in; h 0 when it is to be found
	diameter           float64 // expected, 0 when not

	circle  circle
	degrees float64
	oval    string // what is wrong with the die size given
}

// wholeWay is how many degrees of outline hold a circle by themselves.
const wholeWay = 270

// find fits the outline by itself first. Where it is seen over a part of the way
// only, the size the wafer must have is brought in.
func (o *outline) find() bool {
	k := o.known
	o.w, o.h, o.diameter = 1, 0, 0
	if k.DieWidthMM > 0 && k.DieHeightMM > 0 {
		o.w, o.h = k.DieWidthMM, k.DieHeightMM
	}
	free := o.settle()
	if o.h == 0 {
		return free
	}
	if round, text := o.roundness(); text != "" {
		// the centre of the oval is that of the wafer all the same; its radius is that of
		// the circle of equal area
		rho := round.circle.rho * math.Sqrt(o.w*o.h/(round.circle.w*round.circle.h))
		o.circle, o.degrees, o.oval = round.circle, round.degrees, text
		o.circle.rho, o.circle.w, o.circle.h = rho, o.w, o.h
		return true
	}
	if free && o.degrees >= wholeWay {
		return true
	}
	o.diameter = k.DiameterMM
	if free && !(o.diameter > 0) {
		o.diameter = o.standard()
	}
	if !(o.diameter > 0) {
		return free
	}
	byItself, degrees := o.circle, o.degrees
	if !o.settle() {
		o.circle, o.degrees = byItself, degrees
		return free
	}
	return true
}

// settle fits the outline, drops the few dice that lie outside it and the ends of
// cut sides, and fits again until nothing changes.
func (o *outline) settle() bool {
	all := o.spots
	p := all
	var out []bool
	for range 8 {
		f := o.fitter(p)
		if len(out) == len(f.x) {
			f.out = out
		}
		c, ok := f.fit()
		if !ok {
			return false
		}
		o.circle, o.degrees = c, f.degrees(c)
		cuts := f.cutEnds(c, math.Hypot(c.w*o.spacingX, c.h*o.spacingY))
		limit := c.rho + math.Hypot(c.w*o.spacingX, c.h*o.spacingY)
		inside := filter(all, func(s spot) bool { return o.cornerDistance(s) <= limit })
		dropped := len(all) - len(inside)
		if dropped > max(3, len(all)/50) || len(inside) < fewestSpots {
			break
		}
		if len(inside) == len(p) && slices.Equal(cuts, f.out) {
			break
		}
		p, out = inside, cuts
	}
	return true
}

// cornerDistance is the distance of a die's far corner from the centre.
func (o *outline) cornerDistance(s spot) float64 {
	c := o.circle
	return math.Hypot((math.Abs(float64(s.x)-c.cx)+0.5)*c.w, (math.Abs(float64(s.y)-c.cy)+0.5)*c.h)
}

// fitter prepares the fit to the hull of dice.
func (o *outline) fitter(p []spot) *fitter {
	f := &fitter{w: o.w, h: o.h, rhoMax: math.Inf(1)}
	for _, c := range hull(p) {
		f.x = append(f.x, float64(c.x)/2)
		f.y = append(f.y, float64(c.y)/2)
	}
	// an edge die may be missing here and there
	f.grain = 0.7 * max(o.w*o.spacingX, o.h*o.spacingY)
	if o.diameter > 0 {
		r := o.diameter / 2
		f.rhoMax = r + math.Hypot(o.w, o.h)/2 // dice whose centre is on the wafer
		f.rho0, f.rhoSigma = r*0.97, r*0.03
		if e := o.known.EdgeExclusionMM; e > 0 {
			f.rho0, f.rhoSigma = r-e, max(e/2, f.grain/2)
		}
	}
	return f
}

// standard is the smallest standard diameter that holds the outline, 0 when none
// is near. Dice may reach over the edge by half their diagonal.
func (o *outline) standard() float64 {
	over := math.Hypot(o.circle.w, o.circle.h) / 2
	for _, d := range standardDiameters {
		if gap := d/2 - o.circle.rho; gap >= -over {
			if gap <= widestExclusion+math.Hypot(o.circle.w*(o.spacingX-1), o.circle.h*(o.spacingY-1)) {
				return d
			}
			return 0
		}
	}
	return 0
}

// geometry puts what was found into words and millimetres.
func (o *outline) geometry() Geometry {
	k, c := o.known, o.circle
	g := Geometry{DiameterMM: k.DiameterMM, DieWidthMM: c.w, DieHeightMM: c.h, EdgeExclusionMM: max(0, k.EdgeExclusionMM),
		CentreX: c.cx, CentreY: c.cy, OutlineRadius: c.rho, CentreSigma: c.sigma / max(c.w, c.h), OutlineDegrees: o.degrees,
		Unit: "mm", Notch: k.Notch, YDown: k.YDown}
	scale := 1.0
	switch {
	case o.h > 0 && k.DiameterMM > 0:
		g.Source = "die size and wafer diameter given; centre found from the outline of the tested dice"
	case o.h > 0:
		if g.DiameterMM = o.standard(); g.DiameterMM > 0 {
			g.Source = fmt.Sprintf("die size given; centre found from the outline of the tested dice; diameter: the standard size that holds the outline's radius of %.4g mm", c.rho)
			break
		}
		g.DiameterMM = 2 * c.rho
		g.Source = "die size given; centre and diameter found from the outline of the tested dice"
	case k.DieWidthMM > 0:
		scale = k.DieWidthMM
		g.Source = "die width given; centre and die height found from the outline of the tested dice, taken to be round"
	case k.DieHeightMM > 0:
		scale = k.DieHeightMM / c.h
		g.Source = "die height given; centre and die width found from the outline of the tested dice, taken to be round"
	case k.DiameterMM > 0:
		e := k.EdgeExclusionMM
		if !(e > 0) {
			e = usualExclusion
		}
		scale = (k.DiameterMM/2 - e) / c.rho
		g.Source = fmt.Sprintf("wafer diameter given; centre and die size found from the outline of the tested dice, taken to be round and %g mm inside the edge", e)
	default:
		g.DiameterMM, g.EdgeExclusionMM, g.Unit = nan, nan, "die widths"
		g.Source = "found from the outline of the tested dice, taken to be round"
		g.Why = "neither die size nor wafer diameter is given: lengths are in die widths, and the radius is that of the tested dice"
	}
	g.DieWidthMM *= scale
	g.DieHeightMM *= scale
	g.OutlineRadius *= scale
	if g.Unit == "mm" && !(g.DiameterMM > 0) { // one side of the die was given
		o.circle.rho, o.circle.w, o.circle.h = g.OutlineRadius, g.DieWidthMM, g.DieHeightMM
		if g.DiameterMM = o.standard(); !(g.DiameterMM > 0) {
			g.DiameterMM = 2 * g.OutlineRadius
		}
	}
	g.Caution = o.caution(g)
	return g
}

// caution says what of the given sizes does not fit the tested dice, or what they
// do not tell.
func (o *outline) caution(g Geometry) string {
	k := o.known
	partial := g.OutlineDegrees < wholeWay
	switch {
	case o.oval != "":
		return o.oval
	case o.h > 0 && k.DiameterMM > 0 && g.OutlineRadius > k.DiameterMM/2+math.Hypot(g.DieWidthMM, g.DieHeightMM):
		return fmt.Sprintf("the tested dice reach %.4g mm from their centre, over the edge of a %g mm wafer: check the die size and the diameter", g.OutlineRadius, k.DiameterMM)
	case o.h > 0 && !partial && o.dense() && g.OutlineRadius < 0.35*k.DiameterMM:
		return fmt.Sprintf("the tested dice reach only %.4g mm from their centre on a %g mm wafer: check the die size and the diameter", g.OutlineRadius, k.DiameterMM)
	case partial && o.h == 0:
		return fmt.Sprintf("the outline is seen over %.0f of 360 degrees: without the die size the centre is uncertain", g.OutlineDegrees)
	case partial && !(k.DiameterMM > 0):
		return fmt.Sprintf("the outline is seen over %.0f of 360 degrees: without the wafer diameter the radius and centre are uncertain", g.OutlineDegrees)
	}
	return ""
}

// dense reports whether the map is fine and full enough to judge sizes by it.
func (o *outline) dense() bool {
	return o.spacingX == 1 && o.spacingY == 1 && len(o.spots) >= 100
}

// roundness compares the die size given with the one that makes the outline of a
// whole, dense map round, and returns that outline and what is wrong when they
// differ.
func (o *outline) roundness() (round outline, wrong string) {
	if !o.dense() {
		return round, ""
	}
	round = outline{spots: o.spots, spacingX: 1, spacingY: 1, w: 1}
	if !round.settle() || round.degrees < 300 {
		return round, ""
	}
	given, found := math.Log(o.h/o.w), math.Log(round.circle.h)
	if math.Abs(found-given) < max(0.1, 4*round.circle.ratioSE) {
		return round, ""
	}
	hint := "check die_width_mm and die_height_mm"
	if math.Abs(found+given) < 0.1 {
		hint = "are die_width_mm and die_height_mm swapped?"
	}
	return round, fmt.Sprintf("with the die size given the tested dice form an oval; they form a circle when dice are %.3g times as high as wide, not %.3g: %s", round.circle.h, o.h/o.w, hint)
}
