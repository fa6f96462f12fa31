package build

import (
	"bytes"
	"math"
	"math/rand/v2"
	"runtime"
	"slices"
	"strconv"
	"testing"

	"kneepoint/config"
	"kneepoint/reports"
)

// mapLot is a lot of made-up maps: 24 wafers of 1,264 dice of 2.4 mm on 100 mm. Dice
// fail at random at 3 %, on wafers 1 to 6 at 60 % in a disc of 12 mm at (15, -10) mm,
// and on all wafers at die (7, 3). V rises by the square of the radius, by 2 from centre
// to edge, with noise of 0.5.
func mapLot(t *testing.T) *reports.Report {
	t.Helper()
	var b bytes.Buffer
	b.WriteString("WAFER,X,Y,HBIN,V\n")
	r := rand.New(rand.NewPCG(11, 5))
	for w := 1; w <= 24; w++ {
		for y := -20; y <= 20; y++ {
			for x := -20; x <= 20; x++ {
				mx, my := 2.4*float64(x), 2.4*float64(y)
				if math.Hypot(math.Abs(mx)+1.2, math.Abs(my)+1.2) > 48 {
					continue
				}
				p := 0.03
				if w <= 6 && math.Hypot(mx-15, my+10) < 12 {
					p = 0.6
				}
				bin := "1"
				if r.Float64() < p || x == 7 && y == 3 {
					bin = "5"
				}
				v := 20 + 2*(mx*mx+my*my)/(48*48) + 0.5*r.NormFloat64()
				b.WriteString(strconv.Itoa(w) + "," + strconv.Itoa(x) + "," + strconv.Itoa(y) + "," + bin + "," + strconv.FormatFloat(v, 'f', 3, 64) + "\n")
			}
		}
	}
	const p = "product: P\nwafer: {diameter_mm: 100, die_width_mm: 2.4, die_height_mm: 2.4, edge_exclusion_mm: 2}\ntests: [{name: V, unit: V, lower: 10}]\n"
	data, file := write(t, b.String()), product(t, p)
	one, many := config.DefaultSettings(), config.DefaultSettings()
	one.Workers, many.Workers = 1, 7
	before := runtime.GOMAXPROCS(1)
	first := makeReport(t, data, file, one)
	runtime.GOMAXPROCS(before)
	rep := makeReport(t, data, file, many)
	if !bytes.Equal(asJSON(t, first), asJSON(t, rep)) {
		t.Error("the report depends on the number of workers")
	}
	for i := range rep.Pictures.Stacks {
		if !bytes.Equal(first.Pictures.Stacks[i].PNG, rep.Pictures.Stacks[i].PNG) {
			t.Error("a stacked map depends on the number of workers")
		}
	}
	return rep
}

func TestMapsOfMadeLot(t *testing.T) {
	r := mapLot(t)
	blob := []string{"1", "2", "3", "4", "5", "6"}
	for i := range r.Wafers {
		w := &r.Wafers[i]
		has := slices.Contains(blob, w.ID)
		found := slices.ContainsFunc(w.Signatures, func(s reports.Signature) bool { return s.Kind == "blob" })
		if found != has {
			t.Errorf("wafer %s: signatures %+v", w.ID, w.Signatures)
		}
		if has {
			s := w.Signatures[0]
			// 0.57 more fails than the background on the disc's share of the tested area
			if want := 0.57 * 12 * 12 / (46.8 * 46.8); math.Abs(float64(s.Loss)-want) > 0.3*want || !(s.PValue < 1e-6) {
				t.Errorf("wafer %s: loss %v, want about %.3f; p %v", w.ID, s.Loss, want, s.PValue)
			}
			cx, cy := middle(s.Outline)
			if math.Hypot(2.4*cx-15, 2.4*cy+10) > 3 {
				t.Errorf("wafer %s: the outline is about (%.1f, %.1f) dice, want (6.25, -4.2)", w.ID, cx, cy)
			}
			if c := w.Spatial.Scan; !(c.PValue <= 0.01) || math.Hypot(2.4*float64(c.X)-15, 2.4*float64(c.Y)+10) > 6 {
				t.Errorf("wafer %s: scan %+v", w.ID, c)
			}
			if a := w.Spatial.Alike; !(a.Moran.PValue < 1e-6) || !(a.Geary.Value < 1) || w.Spatial.HotSpots.Dice < 20 {
				t.Errorf("wafer %s: %+v, hot spots %+v", w.ID, a, w.Spatial.HotSpots)
			}
		}
	}
	if len(r.Groups) != 2 || !slices.Equal(r.Groups[0].Wafers, blob) {
		t.Errorf("groups %+v: %s", r.Groups, r.GroupsWhy)
	}
	if len(r.Repeaters) == 0 || r.Repeaters[0].X != 7 || r.Repeaters[0].Y != 3 || r.Repeaters[0].Failing != 24 {
		t.Errorf("repeaters %+v, want die (7, 3) on 24 wafers first", r.Repeaters)
	}
	for _, p := range r.Repeaters[1:] { // six wafers fail often there
		if math.Hypot(2.4*float64(p.X)-15, 2.4*float64(p.Y)+10) > 12 {
			t.Errorf("repeater outside of the disc: %+v", p)
		}
	}
	if len(r.Signatures) == 0 || r.Signatures[0].Kind != "blob" || !slices.Equal(r.Signatures[0].Wafers, blob) {
		t.Errorf("stacked: %+v", r.Signatures)
	} else if want := 0.57 * 12 * 12 / (46.8 * 46.8) * 6 / 24; math.Abs(float64(r.Signatures[0].Loss)-want) > 0.3*want {
		t.Errorf("stacked: loss %v, want about %.4f", r.Signatures[0].Loss, want)
	}
	// The parabola is 2 from the centre to 48 mm. The mean of 24 noises leaves a share
	// of 1/3 / (1/3 + 0.25 * pi/2 / 24) to the smooth part, 2 q^2 having a variance of 1/3.
	s := r.Tests[0].Surface
	if s == nil || !(s.Smooth > 0.9) || math.Abs(float64(s.Bowl.Estimate)-2) > 0.25 || !(s.Alike.Moran.PValue < 1e-6) {
		t.Errorf("surface %+v", s)
	}
	if s := r.Tests[0].ByWafer[3].Surface; s == nil || math.Abs(float64(s.Noise)-0.5) > 0.05 || !(s.Smooth > 0.4 && s.Smooth < 0.7) {
		t.Errorf("surface of a wafer %+v", s)
	}
	if n := len(r.Pictures.Stacks); n != len(r.Stacks) || len(r.Pictures.Surfaces) != 1 {
		t.Errorf("%d pictures of %d stacks, %d of surfaces", n, len(r.Stacks), len(r.Pictures.Surfaces))
	}
}

func middle(paths []reports.Path) (x, y float64) {
	n := 0.0
	for _, p := range paths {
		for i := range p.X[1:] {
			x, y, n = x+float64(p.X[i]), y+float64(p.Y[i]), n+1
		}
	}
	return x / n, y / n
}

// Without coordinates, and with one wafer, the report says why there is nothing.
func TestMapsSayWhy(t *testing.T) {
	r := makeReport(t, write(t, "WAFER,HBIN,BV\n1,1,25\n1,5,3\n2,1,26\n"), "", config.DefaultSettings())
	const none = "the data have no die coordinates"
	if r.GroupsWhy != none || r.StacksWhy != none || r.Wafers[0].Spatial.Why != none || r.Tests[0].SurfaceWhy != none || len(r.Wafers[0].Signatures) != 0 {
		t.Errorf("groups %q, stacks %q, wafer %q, test %q", r.GroupsWhy, r.StacksWhy, r.Wafers[0].Spatial.Why, r.Tests[0].SurfaceWhy)
	}
	r = makeReport(t, write(t, "WAFER,X,Y,HBIN,BV\n1,0,0,1,25\n1,1,0,5,3\n1,2,0,1,26\n"), "", config.DefaultSettings())
	if r.GroupsWhy != "the lot has one wafer" || r.Wafers[0].Signatures[0].Kind != "none" || r.Tests[0].SurfaceWhy == "" {
		t.Errorf("groups %q, signatures %+v, surface %q", r.GroupsWhy, r.Wafers[0].Signatures, r.Tests[0].SurfaceWhy)
	}
}

// leastOften against the binomial law summed the long way.
func TestLeastOften(t *testing.T) {
	choose := func(n, k int) float64 {
		a, _ := math.Lgamma(float64(n + 1))
		b, _ := math.Lgamma(float64(k + 1))
		c, _ := math.Lgamma(float64(n - k + 1))
		return math.Exp(a - b - c)
	}
	for _, n := range []int{1, 2, 5, 25, 200} {
		for _, rate := range []float64{0, 0.01, 0.05, 0.3, 0.9, 1} {
			want := n
			for c := n; c >= 1; c-- {
				tail := 0.0
				for k := c; k <= n; k++ {
					tail += choose(n, k) * math.Pow(rate, float64(k)) * math.Pow(1-rate, float64(n-k))
				}
				if tail <= oftenShare {
					want = c
				}
			}
			if got := int(leastOften(n, rate)); got != want {
				t.Errorf("%d wafers at %g: %d, want %d", n, rate, got, want)
			}
		}
	}
}

// Simplified lines stay within the tolerance and keep their ends.
func TestSimplify(t *testing.T) {
	var circle [][2]float64
	for i := range 121 {
		s, c := math.Sincos(float64(i) * math.Pi / 60)
		circle = append(circle, [2]float64{50 * c, 50 * s})
	}
	got := simplify(circle, 0.1)
	if len(got) > 70 || got[0] != circle[0] || got[len(got)-1] != circle[120] {
		t.Errorf("%d points", len(got))
	}
	for _, p := range circle {
		near := math.Inf(1)
		for i := 1; i < len(got); i++ {
			near = math.Min(near, fromLine(p, got[i-1], got[i]))
		}
		if near > 0.1 {
			t.Fatalf("%v is %.3f off the line", p, near)
		}
	}
}
