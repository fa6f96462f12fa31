package wafermap

import "math"

// windows are all windows of a scan over a padded raster, on which none is cut.
type windows struct {
	f      *field
	shapes []scanShape
	at     []window
	pad    int
	stride int
	prefix []int32 // running fails along the padded lines
	random []float64
}

type scanShape struct {
	a, b, angle float64 // radii
	spans       []scanSpan
}

// scanSpan is a stretch of a line of cells in a window, as offsets into prefix.
type scanSpan struct{ from, to int32 }

type window struct {
	shape int16
	base  int32   // of its centre in prefix
	n     float64 // dice
	e     float64 // expected fails
	scale float64 // 1 / (e (1-n/N) (1-p)): turns (o-e)^2 into z^2
}

func newWindows(f *field, options ScanOptions) *windows {
	w := &windows{f: f}
	cell := math.Max(f.du, math.Abs(f.dv))
	w.pad = 0
	type form struct {
		aspect float64
		angles int
	}
	forms := []form{{1, 1}, {2.5, 6}}
	if options.CirclesOnly {
		forms = forms[:1]
	}
	var sizes []float64 // geometric mean radii
	for size := 1.1 * cell; size < 1; size *= 1.38 {
		sizes = append(sizes, size)
	}
	for i, size := range sizes {
		for _, form := range forms {
			if form.aspect > 1 && i == 0 {
				continue
			}
			root := math.Sqrt(form.aspect)
			for k := range form.angles {
				w.shapes = append(w.shapes, scanShape{a: size * root, b: size / root, angle: math.Pi * float64(k) / float64(form.angles)})
				reach := size * root
				w.pad = max(w.pad, int(reach/f.du)+1, int(reach/math.Abs(f.dv))+1)
			}
		}
	}
	w.stride = f.cols + 2*w.pad + 1
	w.prefix = make([]int32, w.stride*(f.lines+2*w.pad))
	dice := make([]int32, len(w.prefix))
	w.load(dice, f.raster.n)
	for s := range w.shapes {
		w.place(int16(s), dice, options.MaxShare)
	}
	return w
}

// load fills running sums with counts by cell.
func (w *windows) load(prefix, count []int32) {
	for j := range w.f.lines {
		run := int32(0)
		row := prefix[(j+w.pad)*w.stride : (j+w.pad+1)*w.stride]
		for i := range w.f.cols {
			run += count[j*w.f.cols+i]
			row[w.pad+i+1] = run
		}
		for i := w.pad + w.f.cols + 1; i < w.stride; i++ {
			row[i] = run
		}
	}
}

// place lists the windows of one shape: centres lie not quite half the smaller radius apart.
func (w *windows) place(s int16, dice []int32, share float64) {
	f, shape := w.f, &w.shapes[s]
	sin, cos := math.Sincos(shape.angle)
	aa, bb := 1/(shape.a*shape.a), 1/(shape.b*shape.b)
	xx, xy, yy := cos*cos*aa+sin*sin*bb, sin*cos*(aa-bb), sin*sin*aa+cos*cos*bb
	half := math.Sqrt(sq(shape.a*sin) + sq(shape.b*cos))
	for j := -int(half / math.Abs(f.dv)); j <= int(half/math.Abs(f.dv)); j++ {
		dy := float64(j) * f.dv
		root := xy*xy*dy*dy - xx*(yy*dy*dy-1)
		if root < 0 {
			continue
		}
		root = math.Sqrt(root)
		from, to := int(math.Ceil((-xy*dy-root)/xx/f.du)), int(math.Floor((-xy*dy+root)/xx/f.du))
		if from <= to {
			shape.spans = append(shape.spans, scanSpan{int32(j*w.stride + from), int32(j*w.stride + to + 1)})
		}
	}
	stepX, stepY := max(1, int(0.45*shape.b/f.du)), max(1, int(0.45*shape.b/math.Abs(f.dv)))
	p := f.total.o / f.total.n
	for y := stepY / 2; y < f.lines; y += stepY {
		for x := stepX / 2; x < f.cols; x += stepX {
			base := int32((y+w.pad)*w.stride + x + w.pad)
			n := float64(held(dice, shape.spans, base))
			if n < 1 || n > share*f.total.n {
				continue
			}
			w.at = append(w.at, window{shape: s, base: base, n: n, e: n * p, scale: 1 / (n * p * (1 - n/f.total.n) * (1 - p))})
		}
	}
}

func held(prefix []int32, spans []scanSpan, base int32) (n int32) {
	for _, s := range spans {
		n += prefix[base+s.to] - prefix[base+s.from]
	}
	return n
}

// strongest is the highest log-likelihood ratio over all windows.
func (w *windows) strongest(fails []int32) float64 {
	w.load(w.prefix, fails)
	best := 0.0
	for i := range w.at {
		k := &w.at[i]
		o := float64(held(w.prefix, w.shapes[k.shape].spans, k.base))
		if d := o - k.e; d <= 0 || d*d*k.scale < 1.2*best { // z^2/2 is not far below the ratio
			continue
		}
		best = max(best, w.f.gain(tally{o, k.n, k.e}))
	}
	return best
}

// visit walks the cells of the raster in a window.
func (w *windows) visit(k int, cell func(c int)) {
	v := &w.at[k]
	for _, s := range w.shapes[v.shape].spans {
		for at := int(v.base + s.from); at < int(v.base+s.to); at++ {
			if i, j := at%w.stride-w.pad, at/w.stride-w.pad; uint(i) < uint(w.f.cols) && uint(j) < uint(w.f.lines) {
				cell(j*w.f.cols + i)
			}
		}
	}
}
