package wafermap

import (
	"math"
	"math/rand/v2"
)

// A second generator, to see whether the search has got used to the first: hard outlines from
// a ruler and compasses, each size drawn over the widest range that still has the name.

// makePlainWafer is a round wafer with the centre on a die or a die's corner.
func makePlainWafer(random *rand.Rand) madeWafer {
	n := between(random, 300, 20000)
	if random.IntN(2) == 0 {
		n = 300 * math.Exp(random.Float64()*math.Log(20000.0/300))
	}
	aspect := []float64{1, 1, 1.5, 0.7, 2}[random.IntN(5)]
	w := math.Sqrt(math.Pi / n * aspect)
	m := madeWafer{w: w, h: w / aspect, about: "plain"}
	step, keep := 1, 1.0
	if n > 1500 {
		switch random.IntN(6) {
		case 0:
			step, m.about = 2, "plain, every second"
		case 1:
			keep, m.about = between(random, 0.3, 0.9), "plain, a random part"
		}
	}
	half := 0.5 * float64(random.IntN(2))
	across, down := int(1/m.w)+1, int(1/m.h)+1
	sites := []int{0, 2, 3, 4, 5, 8}[random.IntN(6)] // side by side
	columns := random.IntN(2) == 0
	for j := -down; j <= down; j++ {
		for i := -across; i <= across; i++ {
			u, v := (float64(i)+half)*m.w, (float64(j)+half)*m.h
			if u*u+v*v > 1 || i%step != 0 || j%step != 0 || keep < 1 && random.Float64() > keep {
				continue
			}
			m.x, m.y = append(m.x, int32(i+across)), append(m.y, int32(j+down))
			m.u, m.v = append(m.u, u), append(m.v, v)
			a, b := (i+across)/step, (j+down)/step
			if columns {
				a, b = b, a
			}
			if sites > 0 {
				m.site = append(m.site, int32(a%sites))
				a /= sites
			}
			m.order = append(m.order, int32(b*1000+a))
		}
	}
	m.columns, m.lines = 2*across/step, 2*down/step
	if random.IntN(3) == 0 {
		m.order = nil
	}
	m.geo = FindGeometry(m.x, m.y, Known{DieWidthMM: 75 * m.w, DieHeightMM: 75 * m.h, DiameterMM: 150})
	if random.IntN(3) == 0 {
		m.geo = FindGeometry(m.x, m.y, Known{})
	}
	return m
}

func one(b bool) float64 {
	if b {
		return 1
	}
	return 0
}

// makePlainPattern returns nil where the wafer has no room for the kind.
func makePlainPattern(random *rand.Rand, m madeWafer, kind string) *madePattern {
	p := &madePattern{kind: kind, weight: make([]float64, len(m.x))}
	die := math.Max(m.w, m.h)
	fill := func(weight func(u, v, r, t float64) float64) {
		for i := range p.weight {
			p.weight[i] = weight(m.u[i], m.v[i], math.Hypot(m.u[i], m.v[i]), math.Atan2(m.v[i], m.u[i]))
		}
	}
	t0 := between(random, 0, 2*math.Pi)
	s, c := math.Sincos(t0)
	bell := random.IntN(3) == 0
	switch kind {
	case "edge-ring":
		inner := math.Min(between(random, 0.72, 0.96), 1-1.2*die)
		fill(func(u, v, r, t float64) float64 { return one(r > inner) })
	case "edge-arc":
		inner := math.Min(between(random, 0.65, 0.95), 1-1.2*die)
		half := between(random, 30, 240) / 2 * math.Pi / 180
		fill(func(u, v, r, t float64) float64 { return one(r > inner && angleApart(t, t0) < half) })
	case "centre":
		radius := between(random, 0.12, 0.5)
		fill(func(u, v, r, t float64) float64 {
			if bell {
				return math.Exp(-r * r / (radius * radius))
			}
			return one(r < radius)
		})
	case "annulus":
		width := math.Max(between(random, 0.06, 0.3), 1.5*die)
		inner := between(random, 0.25, 0.86-width)
		if bell {
			middle, sigma := inner+width/2, width/2.5
			fill(func(u, v, r, t float64) float64 { return math.Exp(-sq(r-middle) / (2 * sigma * sigma)) })
			break
		}
		fill(func(u, v, r, t float64) float64 { return one(r > inner && r < inner+width) })
	case "line":
		// a chord, or a part of one; a large circle's arc where it is bent
		offset := between(random, -0.8, 0.8)
		reach := math.Sqrt(1 - offset*offset)
		from, to := -reach, reach
		if random.IntN(2) == 0 {
			length := between(random, 0.25, 1) * 2 * reach
			from = between(random, -reach, reach-length)
			to = from + length
		}
		if to-from < 8*die {
			return nil
		}
		width := math.Max(between(random, 0.5, 3)*die, 0.8*die)
		bend := 0.0
		if random.IntN(3) == 0 {
			bend = between(random, -0.5, 0.5) // 1 / radius
		}
		fill(func(u, v, r, t float64) float64 {
			along, away := u*c+v*s, v*c-u*s-offset
			x := along - (from+to)/2
			away -= bend * x * x / 2
			return one(along >= from && along <= to && math.Abs(away) <= width/2)
		})
	case "blob":
		radius := math.Max(between(random, 0.07, 0.3), 1.5*die)
		ratio := between(random, 0.4, 1)
		d, t1 := between(random, 0.25, 0.85), between(random, 0, 2*math.Pi)
		cu, cv := d*math.Cos(t1), d*math.Sin(t1)
		fill(func(u, v, r, t float64) float64 {
			u, v = u-cu, v-cv
			q := math.Hypot((u*c+v*s)/radius, (v*c-u*s)/(radius*ratio))
			if bell {
				return math.Exp(-q * q)
			}
			return one(q < 1)
		})
	case "gradient":
		fill(func(u, v, r, t float64) float64 { return math.Min(math.Max((u*c+v*s+1)/2, 0), 1) })
	case "sector":
		half := between(random, 30, 120) / 2 * math.Pi / 180
		fill(func(u, v, r, t float64) float64 { return one(angleApart(t, t0) < half) })
	case "shot-repeat":
		px, py := 2+random.IntN(9), 2+random.IntN(9)
		if 4*px > m.columns || 4*py > m.lines {
			return nil
		}
		a, b := int32(random.IntN(px)), int32(random.IntN(py))
		wide, high := int32(1), int32(1)
		if random.IntN(4) == 0 && px > 3 && py > 3 {
			wide, high = int32(1+random.IntN(2)), int32(1+random.IntN(2))
		}
		step := int32(1)
		if m.about == "plain, every second" {
			step = 2
		}
		p.shot, p.given = [2]int{px * int(step), py * int(step)}, random.IntN(2) == 0
		x0, y0 := m.x[0]%step, m.y[0]%step
		for i := range p.weight {
			x, y := (m.x[i]-x0)/step, (m.y[i]-y0)/step
			p.weight[i] = one((x+a)%int32(px) < wide && (y+b)%int32(py) < high)
		}
	case "site":
		if m.site == nil {
			return nil
		}
		bad := m.site[random.IntN(len(m.site))]
		for i, k := range m.site {
			p.weight[i] = one(k == bad)
		}
	case "stripe":
		share := between(random, 0.02, 0.3)
		from := between(random, 0, 1-share)
		if m.order == nil {
			along := m.y
			if random.IntN(2) == 0 {
				along = m.x
			}
			from = between(random, 0.05, 0.95-share)
			lo, hi := along[0], along[0]
			for _, k := range along {
				lo, hi = min(lo, k), max(hi, k)
			}
			for i, k := range along {
				q := (float64(k-lo) + 0.5) / (float64(hi-lo) + 1)
				p.weight[i] = one(q >= from && q < from+share)
			}
			break
		}
		for i, k := range ranks(m.order) {
			p.weight[i] = one(k >= from && k < from+share)
		}
	}
	for _, w := range p.weight {
		p.area += w
	}
	if p.area < 3 || p.area > 0.8*float64(len(m.x)) {
		return nil
	}
	return p
}
