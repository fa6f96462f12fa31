package wafermap

import (
	"math"
	"sync"
)

// places is where a wafer's dice lie, which searches for patterns of all its fail maps
// share. Lengths are in radii of the tested disc.
type places struct {
	of     Geometry // as asked for
	geo    Geometry // as used
	radius float64  // in Unit
	grid   *Grid
	rows   []int32 // of the grid, those that take part
	u, v   []float64

	mu      sync.Mutex
	rasters []*cells
	rays    *rays
	slots   *slots
}

// mostGeometries is how many geometries a grid keeps the places of.
const mostGeometries = 2

// placesFor returns the places of a grid's dice in a geometry, those of the last time if
// they are the same.
func (g *Grid) placesFor(of Geometry) *places {
	g.mu.Lock()
	defer g.mu.Unlock()
	for _, p := range g.places {
		if p.of == of {
			return p
		}
	}
	p := newPlaces(g, of)
	if g.places = append(g.places, p); len(g.places) > mostGeometries {
		g.places = append([]*places(nil), g.places[1:]...)
	}
	return p
}

func newPlaces(g *Grid, of Geometry) *places {
	p := &places{of: of, geo: of, grid: g}
	if of.Unit == "" {
		p.geo = g.boxGeometry()
	}
	p.radius = p.geo.OutlineRadius - math.Hypot(p.geo.DieWidthMM, p.geo.DieHeightMM)/2
	if !(p.radius > 0) {
		p.radius = p.geo.Radius()
	}
	n := g.Len()
	p.rows, p.u, p.v = make([]int32, 0, n), make([]float64, 0, n), make([]float64, 0, n)
	for _, r := range g.order {
		mmX, mmY := p.geo.Position(g.x[r], g.y[r])
		u, v := mmX/p.radius, mmY/p.radius
		if !(u*u+v*v <= farOut*farOut) {
			continue
		}
		p.rows, p.u, p.v = append(p.rows, r), append(p.u, u), append(p.v, v)
	}
	return p
}

// cellsFor lays out a raster of at most so many cells.
func (p *places) cellsFor(most int) *cells {
	p.mu.Lock()
	defer p.mu.Unlock()
	for _, c := range p.rasters {
		if c.most == most {
			return c
		}
	}
	c := p.newCells(most)
	p.rasters = append(p.rasters, c)
	return c
}

// raysFor lays out the polar table.
func (p *places) raysFor() *rays {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.rays == nil {
		p.rays = p.newRays()
	}
	return p.rays
}

// slotsFor lays out the lattice.
func (p *places) slotsFor(c *cells) *slots {
	p.mu.Lock()
	defer p.mu.Unlock()
	if p.slots == nil {
		p.slots = p.newSlots(c)
	}
	return p.slots
}
