package wafermap

import "math"

// blobCost grows with how long a blob is, and with how far it hangs over the edge.
func blobCost(cu, cv, a, b, angle float64) float64 {
	d := math.Hypot(cu, cv)
	s, c := 0.0, 1.0
	if d > 0 {
		s, c = cv/d, cu/d
	}
	sin, cos := math.Sincos(angle)
	reach := math.Hypot(a*(c*cos+s*sin), b*(s*cos-c*sin)) // half extent along the wafer's radius
	return math.Abs(math.Log(a/b)) + max(0, d+reach-1.1)*30
}

// findBlob looks for the ellipse away from the wafer's centre with the highest gain: discs
// of all sizes everywhere first, then the best few are fitted as ellipses.
func (f *field) findBlob() *pattern {
	list := shortlist{most: 8}
	near := func(a, b [6]float64) bool { return math.Hypot(a[0]-b[0], a[1]-b[1]) < 0.7*max(a[2], b[2]) }
	small := math.Max(f.du, math.Abs(f.dv))
	for r := 1.2 * small; r < 0.5; r *= 1.27 {
		f.scanDiscs(r, &list, near)
	}
	var best *pattern
	for _, s := range list.items {
		x := []float64{s.x[0], s.x[1], math.Log(s.x[2]), math.Log(s.x[2]), 0}
		step := []float64{0.3 * s.x[2], 0.3 * s.x[2], 0.25, 0.25, 0.5}
		var p pattern
		value := func(x []float64) float64 {
			a, b := math.Exp(x[2]), math.Exp(x[3])
			if a > 3*b || b > 3*a || math.Hypot(x[0], x[1]) > 0.9 || f.round && math.Hypot(x[0], x[1]) < centreReach || math.Min(a, b) < 0.8*small {
				return -1
			}
			t := f.ellipse(x[0], x[1], a, b, x[4])
			if t.n > 0.5*f.total.n {
				return -1
			}
			return f.gain(t) - sizeCost(t, f.total) - blobCost(x[0], x[1], a, b, x[4])
		}
		if f.round && math.Hypot(x[0], x[1]) < centreReach {
			d := math.Hypot(x[0], x[1]) + 1e-9
			x[0], x[1] = x[0]*centreReach/d*1.01, x[1]*centreReach/d*1.01
			if d < 1e-6 {
				x[0] = centreReach * 1.01
			}
		}
		v := climb(x, step, 4, value)
		if v <= 0 || best != nil && v <= best.gain-best.cost {
			continue
		}
		p = pattern{shape: shapeBlob, cu: x[0], cv: x[1], a: math.Exp(x[2]), b: math.Exp(x[3]), angle: x[4]}
		p.tally = f.ellipse(p.cu, p.cv, p.a, p.b, p.angle)
		p.gain, p.cost = f.gain(p.tally), sizeCost(p.tally, f.total)+blobCost(p.cu, p.cv, p.a, p.b, p.angle)
		best = &p
	}
	return best
}

// discMask is a disc of cells as the stretches of the lines it covers.
type discMask struct {
	f     *field
	spans []discSpan
	reach int // of its lines from the middle
	wide  int // of its columns
}

// discSpan is a stretch of cells, and the same as offsets into running sums.
type discSpan struct{ j, from, to, lower, upper int }

func (f *field) newDisc(r float64) discMask {
	d := discMask{f: f}
	dv := math.Abs(f.dv)
	d.reach = int(r / dv)
	for j := -d.reach; j <= d.reach; j++ {
		half := int(math.Sqrt(max(0, r*r-sq(float64(j)*dv))) / f.du)
		d.wide = max(d.wide, half)
		d.spans = append(d.spans, discSpan{j, -half, half + 1, j*f.along.stride - half, j*f.along.stride + half + 1})
	}
	return d
}

// held counts the fails and dice of the disc about a cell.
func (d *discMask) held(x, y int) (count uint64) {
	f := d.f
	if x >= d.wide && x < f.cols-d.wide && y >= d.reach && y < f.lines-d.reach { // all of it is on the raster
		at, sums := y*f.along.stride+x, f.along.sums
		for i := range d.spans {
			s := &d.spans[i]
			count += sums[at+s.upper].count - sums[at+s.lower].count
		}
		return count
	}
	for _, s := range d.spans {
		if j := y + s.j; uint(j) < uint(f.lines) {
			dc, _ := f.along.span(j, max(0, x+s.from), min(f.cols, x+s.to))
			count += dc
		}
	}
	return count
}

// expected are the fails expected in the disc.
func (d *discMask) expected(x, y int) (e float64) {
	f := d.f
	for _, s := range d.spans {
		if j := y + s.j; uint(j) < uint(f.lines) {
			_, de := f.along.span(j, max(0, x+s.from), min(f.cols, x+s.to))
			e += de
		}
	}
	return e
}

// scanDiscs offers all discs of one radius with centres half of it apart.
func (f *field) scanDiscs(r float64, list *shortlist, near func(a, b [6]float64) bool) {
	d := f.newDisc(r)
	widest := 0.0
	for _, s := range d.spans {
		widest += float64(s.to - s.from)
	}
	// no window holds more dice than this, so none costs less
	most := widest * float64(f.fullest)
	least := max(0, math.Log(f.total.n/most))
	floor, times := -1.0, 0.0
	stepX, stepY := max(1, int(0.5*r/f.du+0.5)), max(1, int(0.5*r/math.Abs(f.dv)+0.5))
	for y := stepY / 2; y < f.lines; y += stepY {
		cv := f.v0 + float64(y)*f.dv
		for x := stepX / 2; x < f.cols; x += stepX {
			cu := f.u0 + float64(x)*f.du
			if cu*cu+cv*cv > 1 {
				continue
			}
			count := d.held(x, y)
			if count>>32 < 2 {
				continue
			}
			if now := max(0, list.floor()); now != floor {
				// With as few expected as dice have at least, a disc is hopeless unless
				// o > e + sqrt(c e), which is at least e times this: e is at most q most.
				q := f.lowest * (1 - 1e-9)
				floor = now
				times = q + math.Sqrt(1.6*(floor+least)*q*(1-q)*max(0, 1-most/f.total.n)/most)
				times *= 1 - 1e-9
			}
			// (o-e)^2 / (e (1-e/n)) falls in e up to o: what is hopeless with few is so with more.
			t := unpack(count, 0)
			if t.o <= times*t.n {
				continue
			}
			if t.e = d.expected(x, y); f.hopeless(t, floor+least) {
				continue
			}
			cost := sizeCost(t, f.total)
			if v := f.gain(t) - cost; v > floor {
				list.offer(v, [6]float64{cu, cv, r}, near)
			}
		}
	}
}
