package wafermap

import (
	"math"
	"math/rand/v2"
)

// madeWafer is a wafer to be tested, before anything fails.
type madeWafer struct {
	x, y        []int32
	u, v        []float64 // in radii from the true centre, v up
	w, h        float64   // of a die, in radii
	geo         Geometry
	site, order []int32 // nil: not recorded
	columns     int     // of the box
	lines       int
	about       string
}

func between(random *rand.Rand, lo, hi float64) float64 { return lo + (hi-lo)*random.Float64() }

func makeWafer(random *rand.Rand) madeWafer {
	n := between(random, 300, 20000)
	if random.IntN(2) == 0 {
		n = 300 * math.Exp(random.Float64()*math.Log(20000.0/300))
	}
	d := []float64{76.2, 100, 150, 200}[random.IntN(4)]
	exclusion := between(random, 1, 5)
	r := d/2 - exclusion
	aspect := math.Exp(between(random, -0.7, 0.7) * random.Float64())
	w := math.Sqrt(math.Pi * r * r / n * aspect)
	h := w / aspect
	cx, cy := between(random, -50, 50), between(random, -50, 50)
	m := madeWafer{w: w / r, h: h / r, about: "full"}
	down := random.IntN(2) == 0
	byCorner := random.IntN(2) == 0

	every, everyY, keep, cut := 1, 1, 1.0, 2.0
	switch random.IntN(10) {
	case 0:
		if n > 1500 {
			every, everyY, m.about = 2, 2, "every second row and column"
		}
	case 1:
		if n > 1200 {
			every, m.about = 2+random.IntN(2), "every few columns"
		}
	case 2:
		if n > 700 {
			keep, m.about = between(random, 0.4, 0.9), "a random part"
		}
	case 3:
		if n > 700 {
			cut, m.about = between(random, 0, 0.8), "cut off"
		}
	}
	cutAngle := 2 * math.Pi * random.Float64()
	siteX, siteY := 1, 1
	switch random.IntN(6) {
	case 0:
		siteX = 2 + random.IntN(3)
	case 1:
		siteY = 2 + random.IntN(3)
	case 2:
		siteX, siteY = 2, 2
	case 3:
		siteX, siteY = 4, 2
	case 4:
		siteX = 8
	}
	skew := random.IntN(2) * random.IntN(2) // sites along a diagonal
	recorded := random.IntN(5) < 3
	byColumn := random.IntN(3) == 0
	serpentine := random.IntN(2) == 0
	nx, ny := int(r/w)+2, int(r/h)+2
	x0, y0 := int(math.Round(cx)), int(math.Round(cy))
	if random.IntN(3) == 0 {
		random.Float64()
	}
	for y := y0 - ny; y <= y0+ny; y++ {
		for x := x0 - nx; x <= x0+nx; x++ {
			dx, dy := (float64(x)-cx)*w, (float64(y)-cy)*h
			switch {
			case byCorner && math.Hypot(math.Abs(dx)+w/2, math.Abs(dy)+h/2) > r:
				continue
			case !byCorner && math.Hypot(dx, dy) > r:
				continue
			case (x-x0+1000*every)%every != 0 || (y-y0+1000*everyY)%everyY != 0:
				continue
			case keep < 1 && random.Float64() > keep:
				continue
			case dx*math.Cos(cutAngle)+dy*math.Sin(cutAngle) > cut*r:
				continue
			}
			m.x, m.y = append(m.x, int32(x)), append(m.y, int32(y))
			u, v := dx/r, dy/r
			if down {
				v = -v
			}
			m.u, m.v = append(m.u, u), append(m.v, v)
			// places in spacings of the sampled map
			px, py := (x-x0+1000*every)/every, (y-y0+1000*everyY)/everyY
			tx, ty := px/siteX, (py+skew*px)/siteY
			s := px%siteX + siteX*((py+skew*px)%siteY)
			if byColumn {
				tx, ty = ty, tx
			}
			if serpentine && ty%2 == 1 {
				tx = 9999 - tx
			}
			m.site, m.order = append(m.site, int32(s+1)), append(m.order, int32(ty*10000+tx))
		}
	}
	m.columns, m.lines = 2*nx/every, 2*ny/everyY
	known := Known{DiameterMM: d, DieWidthMM: w, DieHeightMM: h, EdgeExclusionMM: exclusion, YDown: down}
	if cut > 1 && random.IntN(3) == 0 {
		known = Known{DieWidthMM: w, DieHeightMM: h, YDown: down}
	}
	m.geo = FindGeometry(m.x, m.y, known)
	if siteX*siteY == 1 || !recorded {
		m.site = nil
	}
	if !recorded {
		m.order = nil
	}
	return m
}
