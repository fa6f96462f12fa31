package wafermap

import "math"

// Known is what is known of the wafer beforehand. Zero means not known.
type Known struct {
	DiameterMM, DieWidthMM, DieHeightMM float64
	EdgeExclusionMM                     float64
	Notch                               string // "down", "up", "left", "right", ""
	YDown                               bool   // die y grows towards the bottom of the map
}

// Geometry is the wafer under the die grid. FindGeometry makes it.
//
// Where no length in millimetres is known, DieWidthMM is 1, DieHeightMM the
// height of a die in die widths, DiameterMM and EdgeExclusionMM are NaN and all
// lengths are in die widths: Unit says so. Where nothing could be found, all
// numbers are NaN, Unit is "" and Why says why; methods then return NaN,
// false or -1.
type Geometry struct {
	DiameterMM, DieWidthMM, DieHeightMM float64
	EdgeExclusionMM                     float64 // 0 when not known
	CentreX, CentreY                    float64 // of the wafer, in die coordinates: 0.5 is the street between die 0 and die 1
	OutlineRadius                       float64 // radius of the circle round the tested dice, corners included
	CentreSigma                         float64 // standard error of the centre, in dice of the larger pitch
	OutlineDegrees                      float64 // how much of the way round the outline is seen: below about 200, a partial map
	Unit                                string  // "mm", "die widths" or ""
	Notch                               string
	YDown                               bool
	Source, Why                         string
	Caution                             string // what does not fit, "" when all does
}

// Position returns where a die's centre lies: lengths from the wafer's centre, x to
// the right, y up, in Unit.
func (g Geometry) Position(x, y int32) (mmX, mmY float64) {
	if !placed(x, y) {
		return nan, nan
	}
	mmX = (float64(x) - g.CentreX) * g.DieWidthMM
	mmY = (float64(y) - g.CentreY) * g.DieHeightMM
	if g.YDown {
		mmY = -mmY
	}
	return mmX, mmY
}

// RadiusMM is the distance of a die's centre from the wafer's centre, in Unit.
func (g Geometry) RadiusMM(x, y int32) float64 {
	mmX, mmY := g.Position(x, y)
	return math.Hypot(mmX, mmY)
}

// Radius is the wafer's radius in Unit: half the diameter, or the outline's radius
// where no diameter is known.
func (g Geometry) Radius() float64 {
	if g.DiameterMM > 0 {
		return g.DiameterMM / 2
	}
	return g.OutlineRadius
}

// OnWafer reports whether any part of a die lies on the wafer. Where it does
// not, the die's coordinates are wrong.
func (g Geometry) OnWafer(x, y int32) bool {
	mmX, mmY := g.Position(x, y)
	nearX := max(0, math.Abs(mmX)-g.DieWidthMM/2)
	nearY := max(0, math.Abs(mmY)-g.DieHeightMM/2)
	return math.Hypot(nearX, nearY) < g.Radius()
}

// InExclusion reports whether a die reaches into the edge exclusion or over the
// wafer's edge: whether one of its four corners lies further out than the
// radius less the exclusion (the corner rule).
func (g Geometry) InExclusion(x, y int32) bool {
	mmX, mmY := g.Position(x, y)
	exclusion := g.EdgeExclusionMM
	if !(exclusion > 0) {
		exclusion = 0
	}
	r := g.Radius() - exclusion
	// a billionth of slack, so that rounding does not decide for dice that just fit
	return math.Hypot(math.Abs(mmX)+g.DieWidthMM/2, math.Abs(mmY)+g.DieHeightMM/2) > r*(1+1e-9)
}

// ringRadius is the radius of the disc that the rings share out: that inside the
// edge exclusion where it is known, else the outline of the tested dice, as
// long as the map is not of a few sites far from the edge.
func (g Geometry) ringRadius() float64 {
	r := g.Radius()
	if g.EdgeExclusionMM > 0 {
		return r - g.EdgeExclusionMM
	}
	if g.OutlineRadius >= 0.9*r && g.OutlineRadius < r {
		return g.OutlineRadius
	}
	return r
}

// Ring returns the ring a die's centre lies in, 0 in the centre, -1 without
// a place. The rings have equal area, so about equally many dice: together they cover
// the disc inside the edge exclusion (or the outline of the tested dice), and dice
// further out count in the last.
func (g Geometry) Ring(x, y int32, rings int) int {
	mmX, mmY := g.Position(x, y)
	return ring(mmX, mmY, g.ringRadius(), rings)
}

func ring(mmX, mmY, radius float64, rings int) int {
	share := (mmX*mmX + mmY*mmY) / (radius * radius)
	if math.IsNaN(share) || rings < 1 {
		return -1
	}
	return int(min(share*float64(rings), float64(rings-1)))
}

// RingEdges returns the radii of the rings: rings+1 values in Unit, from 0.
func (g Geometry) RingEdges(rings int) []float64 {
	edges := make([]float64, rings+1)
	for i := range edges {
		edges[i] = g.ringRadius() * math.Sqrt(float64(i)/float64(rings))
	}
	return edges
}

// Sector returns the sector a die's centre lies in, -1 without a place. Sector 0
// begins at +x (3 o'clock), and sectors follow counter-clockwise, y up.
func (g Geometry) Sector(x, y int32, sectors int) int {
	mmX, mmY := g.Position(x, y)
	return sector(mmX, mmY, sectors)
}

func sector(mmX, mmY float64, sectors int) int {
	turn := math.Atan2(mmY, mmX) / (2 * math.Pi)
	if math.IsNaN(turn) || sectors < 1 {
		return -1
	}
	if turn < 0 {
		turn++
	}
	return int(min(turn*float64(sectors), float64(sectors-1)))
}
