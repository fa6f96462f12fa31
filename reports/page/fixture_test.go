package page

import (
	"bytes"
	"cmp"
	"fmt"
	"image"
	"image/color"
	"image/png"
	"math"
	"math/rand/v2"
	"slices"
	"testing"

	"kneepoint/reports"
)

// The fixture is an invented lot, for the structure of the page only: its
// numbers hang together as a real report's do, and nothing checks statistics
// against it.

type fixtureTest struct {
	name, measures, unit, condition string
	lower, upper, centre, sigma     float64
	log                             bool
}

var fixtureTests = []fixtureTest{
	{"BVCBO", "bvcbo", "V", "IC=10uA", 35, math.NaN(), 41.9, 0.9, false},
	{"BVCEO", "bvceo", "V", "IC=1mA", 22.5, math.NaN(), 24.8, 0.6, false},
	{"BVEBO", "bvebo", "V", "IE=10uA", 6, math.NaN(), 7.1, 0.12, false},
	{"ICBO", "icbo", "nA", "VCB=20V", math.NaN(), 5, 0.35, 0.35, true},
	{"HFE1", "hfe", "", "IC=10uA, VCE=5V", 70, 250, 118, 12, false},
	{"HFE2", "hfe", "", "IC=2mA, VCE=5V", 80, 250, 139, 13, false},
	{"VCESAT", "vcesat", "V", "IC=50mA, IB=5mA", math.NaN(), 0.12, 0.092, 0.005, false},
	{"COB", "cob", "pF", "VCB=10V, F=1MHz", math.NaN(), 3.6, 3.31, 0.05, false},
	{"COB30", "cob", "pF", "VCB=30V, F=1MHz", math.NaN(), 3.1, 2.84, 0.05, false},
}

var fixturePalette = color.Palette{
	color.RGBA{}, // no die
	color.RGBA{0xdd, 0xe6, 0xea, 0xff},
	color.RGBA{0x8a, 0x2f, 0x0c, 0xff},
	color.RGBA{0x1d, 0x4f, 0x6b, 0xff},
	color.RGBA{0xb0, 0x72, 0x14, 0xff},
	color.RGBA{0x3c, 0x3c, 0x3c, 0xff},
}

// fixture builds a lot of n wafers, each radius dice from centre to edge, and
// as many tests (the nine above, repeated under further names).
func fixture(t testing.TB, n, radius, tests int) *reports.Report {
	t.Helper()
	f := &fixtureLot{t: t, r: rand.New(rand.NewPCG(7, 11)), radius: radius, report: fixtureFrame()}
	for i := range tests {
		k := fixtureTests[i%len(fixtureTests)]
		if i >= len(fixtureTests) {
			k.name = fmt.Sprintf("%s-%d", k.name, i/len(fixtureTests)+1)
			k.centre += 0.4 * k.sigma * float64(i%7)
		}
		f.tests = append(f.tests, k)
	}
	f.values, f.fails = make([][]float64, tests), make([][]float64, tests)
	f.first, f.alone, f.any, f.low, f.high = make([]int, tests), make([]int, tests), make([]int, tests), make([]int, tests), make([]int, tests)
	f.byWafer = make([][]reports.WaferLevel, tests)
	for w := range n {
		f.wafer(w)
	}
	f.finish()
	return f.report
}

type fixtureLot struct {
	t                            testing.TB
	r                            *rand.Rand
	radius                       int
	report                       *reports.Report
	tests                        []fixtureTest
	values, fails                [][]float64 // of passing and of failing dice
	first, alone, any, low, high []int
	byWafer                      [][]reports.WaferLevel
	stacked                      []int
	rings, sectors               [8][2]int
}

const fixtureAspect = 0.9

// half is how many dice lie between the centre and the edge along x.
func (f *fixtureLot) half() int { return int(float64(f.radius) / fixtureAspect) }

func (f *fixtureLot) wafer(w int) {
	size, wide := 2*f.radius+1, 2*f.half()+1
	img := image.NewPaletted(image.Rect(0, 0, wide, size), fixturePalette)
	if f.stacked == nil {
		f.stacked = make([]int, wide*size)
	}
	id := fmt.Sprintf("%02d", w+1)
	wafer := reports.Wafer{ID: id, Attributes: map[string]string{"reactor": []string{"R2", "R3"}[w%2], "pocket": fmt.Sprint(w%6 + 1)}}
	counts := make([]int, len(fixturePalette))
	perTest := make([][]float64, len(f.tests))
	first := make([]int, len(f.tests))
	waferShift := f.r.NormFloat64() * 0.4
	for row := range size {
		for column := range wide {
			x, y := fixtureAspect*float64(column-f.half())/float64(f.radius), float64(row-f.radius)/float64(f.radius)
			q := math.Hypot(x, y)
			if q > 0.985 {
				continue
			}
			wafer.Dice++
			failed := []int{}
			v := make([]float64, len(f.tests))
			for k, test := range f.tests {
				z := f.r.NormFloat64() + waferShift
				if test.measures == "bvceo" && w >= 2 && w < 6 {
					z -= 5.2 * (1 - q*q) // thin epi, a bowl
				}
				if q > 0.94 && f.r.Float64() < 0.25 {
					z -= 6
				}
				if w == 10 && math.Abs(x-0.6*y-0.1) < 0.03 && y > -0.5 {
					z -= 9 // a scratch
				}
				v[k] = test.centre + z*test.sigma
				if test.log {
					v[k] = test.centre * math.Exp(0.7*math.Abs(z)*cmp.Or(sign(z), 1)*-1)
				}
				if v[k] < test.lower || v[k] > test.upper {
					failed = append(failed, k)
					if v[k] < test.lower {
						f.low[k]++
					} else {
						f.high[k]++
					}
				}
			}
			c := uint8(1)
			for k := range f.tests {
				perTest[k] = append(perTest[k], v[k])
				if len(failed) == 0 {
					f.values[k] = append(f.values[k], v[k])
				} else {
					f.fails[k] = append(f.fails[k], v[k])
				}
			}
			ring, sector := min(4, int(q*q*5)), (int((math.Atan2(-y, x)+2*math.Pi+math.Pi/8)/(math.Pi/4)))%8
			f.rings[ring][0]++
			f.sectors[sector][0]++
			if len(failed) == 0 {
				wafer.Passing++
				f.rings[ring][1]++
				f.sectors[sector][1]++
			} else {
				f.stacked[row*wide+column]++
				first[failed[0]]++
				f.first[failed[0]]++
				for _, k := range failed {
					f.any[k]++
				}
				if len(failed) == 1 {
					f.alone[failed[0]]++
				}
				c = map[int]uint8{0: 3, 1: 2, 3: 4}[failed[0]]
				if c == 0 {
					c = 5
				}
			}
			counts[c]++
			img.SetColorIndex(column, row, c)
		}
	}
	wafer.Retested = wafer.Dice / 90
	wafer.Yield = fixtureYield(wafer.Passing, wafer.Dice)
	wafer.FirstPass = wafer.Yield.Estimate - 0.01
	if wafer.Yield.Estimate < 0.8 {
		wafer.Stands = "low"
	}
	wafer.MainLoss = mainLoss(f.tests, first, wafer.Dice)
	z := reports.Number(1 + f.r.NormFloat64())
	if wafer.Stands == "low" || w == 10 {
		z = reports.Number(23.4 + f.r.NormFloat64())
	}
	wafer.Spatial = reports.Spatial{
		JoinCount: &reports.JoinCount{Neighbours: "queen", Z: z, PValue: reports.Number(math.Erfc(float64(z)/math.Sqrt2) / 2), Method: "randomisation"},
		Clusters:  []reports.Cluster{{Dice: 4 + max(0, int(z))*7, X: 3.2, Y: -1.4, RadiusMM: 8.6, Width: 12, Height: 9}}, Total: 14,
	}
	f.report.Wafers = append(f.report.Wafers, wafer)
	for k := range f.tests {
		f.byWafer[k] = append(f.byWafer[k], fixtureLevel(id, perTest[k], f.tests[k]))
	}
	labels := []string{"", "passes", "fails BVCEO first", "fails BVCBO first", "fails ICBO first", "fails another test first"}
	f.report.Pictures.Wafers = append(f.report.Pictures.Wafers, f.raster(id, img, counts, labels))
}

func sign(v float64) float64 {
	if v < 0 {
		return -1
	}
	return 1
}

func (f *fixtureLot) raster(name string, img *image.Paletted, counts []int, labels []string) reports.Raster {
	var b bytes.Buffer
	e := png.Encoder{CompressionLevel: png.BestCompression}
	if err := e.Encode(&b, img); err != nil {
		f.t.Fatal(err)
	}
	r := reports.Raster{
		Name: name, Columns: img.Rect.Dx(), Rows: img.Rect.Dy(), X0: -f.half(), Y0: f.radius, Step: 1, Aspect: fixtureAspect,
		CentreColumn: float64(f.half()) + 0.5, CentreRow: float64(f.radius) + 0.5, RadiusColumns: (float64(f.radius) + 1) / fixtureAspect, RadiusRows: float64(f.radius) + 1,
		Notch: "down", PNG: b.Bytes(),
	}
	for i := 1; i < len(labels); i++ {
		c := img.Palette[i].(color.RGBA)
		r.Legend = append(r.Legend, reports.Swatch{R: c.R, G: c.G, B: c.B, Label: labels[i], Dice: counts[i]})
	}
	return r
}

func fixtureYield(pass, n int) reports.Interval {
	p := float64(pass) / float64(n)
	d := 1.96 * math.Sqrt(p*(1-p)/float64(n))
	return reports.Interval{Estimate: reports.Number(p), Lower: reports.Number(p - d), Upper: reports.Number(min(1, p+d)), Method: "Wilson, counting only"}
}

func mainLoss(tests []fixtureTest, first []int, n int) []reports.Share {
	var out []reports.Share
	for k, c := range first {
		if c > 0 {
			out = append(out, reports.Share{Name: tests[k].name, Share: reports.Number(float64(c) / float64(n)), Dice: c})
		}
	}
	slices.SortStableFunc(out, func(a, b reports.Share) int { return cmp.Compare(b.Dice, a.Dice) })
	return out[:min(3, len(out))]
}

func quantile(sorted []float64, p float64) reports.Number {
	if len(sorted) == 0 {
		return reports.NaN
	}
	return reports.Number(sorted[int(p*float64(len(sorted)-1))])
}

func fixtureLevel(id string, v []float64, test fixtureTest) reports.WaferLevel {
	s := slices.Sorted(slices.Values(v))
	l := reports.WaferLevel{Wafer: id, N: len(s), Median: quantile(s, 0.5), Q05: quantile(s, 0.05), Q25: quantile(s, 0.25), Q75: quantile(s, 0.75), Q95: quantile(s, 0.95)}
	l.MADSigma = (l.Q75 - l.Q25) / 1.349
	for _, x := range s {
		if x < test.lower || x > test.upper {
			l.Fails++
		}
	}
	return l
}

func (f *fixtureLot) finish() {
	r := f.report
	passing := 0
	for i := range r.Wafers {
		r.Dice += r.Wafers[i].Dice
		passing += r.Wafers[i].Passing
	}
	y := fixtureYield(passing, r.Dice)
	r.Yield.Counting = y
	y.Lower, y.Upper, y.Method = y.Estimate-0.031, y.Estimate+0.027, "process level, clustered by wafer"
	r.Yield.Interval, r.Yield.Passing, r.Yield.FirstPass = y, passing, y.Estimate-0.011
	share := func(n int) reports.Number { return reports.Number(float64(n) / float64(r.Dice)) }
	for i, name := range []string{"gain grade A", "gain grade B", "gain grade C"} {
		n := passing * []int{60, 32, 8}[i] / 100
		r.Yield.Grades = append(r.Yield.Grades, reports.Grade{Bin: i + 1, Name: name, Dice: n, Share: share(n)})
		r.Bins = append(r.Bins, reports.Bin{Kind: "hard", Bin: i + 1, Name: name, Pass: true, Dice: n, Share: share(n), Cumulative: reports.NaN})
	}
	left := r.Dice - passing
	for i, name := range []string{"breakdown", "leakage", "gain", "saturation", "capacitance", "continuity"} {
		n := left * []int{58, 20, 11, 6, 4, 1}[i] / 100
		r.Bins = append(r.Bins, reports.Bin{Kind: "hard", Bin: i + 5, Name: name, Dice: n, Share: share(n), Cumulative: reports.Number([]float64{0.58, 0.78, 0.89, 0.95, 0.99, 1}[i])})
	}
	for k := range f.tests {
		r.Tests = append(r.Tests, f.test(k))
	}
	for i := range 5 {
		z := reports.Zone{Kind: "ring", Index: i, Name: fmt.Sprintf("ring %d", i+1), From: reports.Number(50 * math.Sqrt(float64(i)/5)), To: reports.Number(50 * math.Sqrt(float64(i+1)/5)), Dice: f.rings[i][0]}
		z.Yield = fixtureYield(f.rings[i][1], max(1, f.rings[i][0]))
		r.Zones = append(r.Zones, z)
	}
	for i, name := range []string{"E", "NE", "N", "NW", "W", "SW", "S", "SE"} {
		z := reports.Zone{Kind: "sector", Index: i, Name: name, From: reports.Number(float64(i)*45 - 22.5), To: reports.Number(float64(i)*45 + 22.5), Dice: f.sectors[i][0]}
		z.Yield = fixtureYield(f.sectors[i][1], max(1, f.sectors[i][0]))
		r.Zones = append(r.Zones, z)
	}
	f.stack()
	f.patterns()
}

// patterns gives the wafers patterns, groups, stacks and the rest that maps have.
func (f *fixtureLot) patterns() {
	r := f.report
	n := reports.Number(f.radius)
	square := []reports.Path{{X: []reports.Number{-n / 2, n / 2, n / 2, -n / 2, -n / 2}, Y: []reports.Number{-n / 2, -n / 2, n / 2, n / 2, -n / 2}}}
	blob := reports.Signature{Kind: "blob", Strength: 0.6, PValue: 3e-12, Loss: 0.08, Rate: 0.7, Background: 0.03, Cover: 0.12, Wafers: []string{"03", "04"}, Outline: square, Text: "20 by 20 mm at (0, 0) mm"}
	random := reports.Signature{Kind: "random", Strength: 1, PValue: 0.4, Loss: 0.05, Rate: 0.05, Text: "no structure beyond chance"}
	moment := reports.Moment{Value: 0.31, Expected: -0.001, Z: 22, PValue: 4e-80}
	for i := range r.Wafers {
		w := &r.Wafers[i]
		w.Group, w.Signatures = 1, []reports.Signature{random}
		if i >= 2 && i < 6 {
			w.Group, w.Signatures = 2, []reports.Signature{blob}
		}
		w.Spatial.Alike = &reports.Alike{N: w.Dice, Moran: moment, Geary: moment}
		w.Spatial.HotSpots = &reports.HotSpots{Level: 0.05, Dice: 12}
		w.Spatial.Scan = &reports.Scan{X: 1, Y: 2, Radius: 12, Unit: "mm", Dice: 60, Fails: 40, Expected: 5.2, PValue: 0.005}
	}
	r.Signatures = []reports.Signature{blob}
	r.Groups = []reports.Group{{ID: 1, Wafers: []string{"01", "02"}, Dice: 100, Yield: 0.95, Text: "no pattern in common"}, {ID: 2, Wafers: []string{"03", "04"}, Dice: 100, Yield: 0.7, Text: "blob"}}
	r.Stacks = []reports.Stack{{Of: "group", Group: 1, Wafers: 2, Positions: 50, Rate: 0.05, Signatures: []reports.Signature{random}},
		{Of: "group", Group: 2, Wafers: 2, Positions: 50, Rate: 0.3, Signatures: []reports.Signature{blob}}, {Of: "test", Test: "BVCBO", Wafers: 4, Positions: 50, Rate: 0.02, Signatures: []reports.Signature{random}}}
	for range r.Stacks {
		r.Pictures.Stacks = append(r.Pictures.Stacks, *r.Pictures.Stacked)
	}
	r.Repeaters, r.RepeatersAll = []reports.Repeater{{X: 3, Y: -4, Tested: 25, Failing: 22, Expected: 1.4, PValue: 1e-20, Adjusted: 1e-17, RadiusMM: 11.2, Main: "BVCBO"}}, 1
	r.Pictures.Surfaces = []reports.Surfaces{{Test: "BVCEO", Smooth: *r.Pictures.Stacked, Residual: *r.Pictures.Stacked}}
	for i := range r.Tests {
		e := reports.Interval{Estimate: 0.3, Lower: 0.1, Upper: 0.5}
		r.Tests[i].Surface = &reports.Surface{N: 900, Over: "dice", Unit: r.Tests[i].Unit, Terms: 15, Order: 4, Smooth: 0.7, Site: 0.05, Die: 0.25, Noise: 0.1, Bowl: e, Tilt: e, Direction: 90, RollOff: e, Alike: &reports.Alike{N: 900, Moran: moment, Geary: moment}}
	}
}

func (f *fixtureLot) stack() {
	size, wide := 2*f.radius+1, 2*f.half()+1
	palette := color.Palette{color.RGBA{}}
	labels := []string{""}
	for i := range 8 {
		t := float64(i) / 7
		palette = append(palette, color.RGBA{uint8(238 - 180*t), uint8(242 - 215*t), uint8(244 - 225*t), 255})
		labels = append(labels, fmt.Sprintf("%.1f to %.1f %%", 100*float64(i)/8, 100*float64(i+1)/8))
	}
	img := image.NewPaletted(image.Rect(0, 0, wide, size), palette)
	first := f.report.Pictures.Wafers[0]
	shape, err := png.Decode(bytes.NewReader(first.PNG))
	if err != nil {
		f.t.Fatal(err)
	}
	counts := make([]int, 9)
	for row := range size {
		for column := range wide {
			if _, _, _, a := shape.At(column, row).RGBA(); a == 0 {
				continue
			}
			c := 1 + min(7, f.stacked[row*wide+column]*8/len(f.report.Wafers))
			img.SetColorIndex(column, row, uint8(c))
			counts[c]++
		}
	}
	s := f.raster("fail rate of each die position over all wafers", img, counts, labels)
	f.report.Pictures.Stacked = &s
}

func (f *fixtureLot) test(k int) reports.Test {
	test := f.tests[k]
	s := slices.Sorted(slices.Values(f.values[k]))
	both := slices.Sorted(slices.Values(append(slices.Clone(f.values[k]), f.fails[k]...)))
	share := func(n int) reports.Number { return reports.Number(float64(n) / float64(f.report.Dice)) }
	t := reports.Test{
		Name: test.name, Measures: test.measures, Unit: test.unit, Condition: test.condition, Lower: reports.Number(test.lower), Upper: reports.Number(test.upper), LimitFrom: "product file",
		N: len(both), Missing: 12, Censored: reports.Censored{Clamp: reports.NaN, Floor: reports.NaN}, Over: "all dice with a value",
		Median: quantile(both, 0.5), Min: quantile(both, 0), Max: quantile(both, 1), MADSigma: (quantile(both, 0.75) - quantile(both, 0.25)) / 1.349,
		Skewness: -0.42, Kurtosis: 1.9, LowFails: f.low[k], HighFails: f.high[k], Marginal: 0.31, MarginalMeans: "within two robust sigmas of the passing dice beyond the limit",
		ByWafer: f.byWafer[k],
	}
	if test.name == "BVCBO" {
		t.Censored = reports.Censored{AtLeast: 37, Clamp: 80, Floor: reports.NaN}
	}
	sum := 0.0
	for _, v := range both {
		sum += v
	}
	t.Mean = reports.Number(sum / float64(len(both)))
	t.SD = t.MADSigma * 1.3
	for _, p := range []float64{0.001, 0.01, 0.05, 0.25, 0.5, 0.75, 0.95, 0.99, 0.999} {
		t.Quantiles = append(t.Quantiles, reports.Quantile{P: reports.Number(p), Value: quantile(both, p)})
	}
	alone, any := f.alone[k], f.any[k]
	t.Loss = reports.Loss{First: share(f.first[k]), Alone: share(alone), Any: share(any), FirstDice: f.first[k], AloneDice: &alone, AnyDice: &any}
	t.Histogram = fixtureHistogram(s, f.fails[k], both, test.log)
	c := func(v float64) reports.Interval {
		return reports.Interval{Estimate: reports.Number(v), Lower: reports.Number(v * 0.96), Upper: reports.Number(v * 1.04), Method: "normal"}
	}
	one := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: "one-sided limit"}
	t.Capability = &reports.Capability{N: len(s), Cp: one, Cpk: c(0.63 + 0.2*float64(k)), Pp: one, Ppk: c(0.55 + 0.2*float64(k)), Within: t.MADSigma, Overall: t.SD, Over: "passing dice", Notes: []string{"the distribution is skewed; indices assume a normal one"}}
	for i := -10; i <= 10; i++ {
		for _, l := range []struct {
			name string
			at   float64
		}{{"lower", test.lower}, {"upper", test.upper}} {
			if math.IsNaN(l.at) {
				continue
			}
			d := -0.004 * float64(i)
			if l.name == "upper" {
				d = 0.0006 * float64(i)
			}
			t.LimitCurve = append(t.LimitCurve, reports.LimitPoint{Limit: l.name, Shift: reports.Number(i) / 100, Value: reports.Number(l.at * (1 + float64(i)/100)), Yield: reports.Number(clamp(float64(f.report.Yield.Estimate)+d, 0, 1))})
		}
	}
	return t
}

func fixtureHistogram(pass, fail, both []float64, log bool) *reports.Histogram {
	const n = 70
	low, high := float64(quantile(both, 0.0005)), float64(quantile(both, 0.9995))
	h := &reports.Histogram{Scale: "linear", Rule: "Freedman-Diaconis", Pass: make([]int, n), Fail: make([]int, n)}
	if log {
		h.Scale = "log"
	}
	place := func(v float64) int {
		if log {
			return int(math.Floor(n * math.Log(v/low) / math.Log(high/low)))
		}
		return int(math.Floor(n * (v - low) / (high - low)))
	}
	for i := range n + 1 {
		e := low + (high-low)*float64(i)/n
		if log {
			e = low * math.Pow(high/low, float64(i)/n)
		}
		h.Edges = append(h.Edges, reports.Number(e))
	}
	put := func(counts []int, v []float64) {
		for _, x := range v {
			switch i := place(x); {
			case i < 0:
				h.Below++
			case i >= n:
				h.Above++
			default:
				counts[i]++
			}
		}
	}
	put(h.Pass, pass)
	put(h.Fail, fail)
	return h
}

// fixtureFrame is what does not depend on the dice.
func fixtureFrame() *reports.Report {
	const sum = "9f86d081884c7d659a2feaa0c55ad015a3bf4f1b2b0b822cd15d6c15b0f00a08"
	return &reports.Report{
		Schema: 1, Tool: reports.Tool{Name: "kneepoint", Version: "0.3.0"}, Lot: "KP-0417", Product: "MP-N24",
		Inputs:      []reports.Input{{File: "KP-0417.csv.gz", SHA256: sum, Format: "delimited text, wide", Bytes: 2_917_332, Rows: 34125}},
		ProductFile: &reports.Input{File: "MP-N24.yaml", SHA256: sum, Format: "product file", Bytes: 1822},
		Baseline:    reports.Source{Source: "product file", ID: "MP-N24", SHA256: sum},
		Program:     reports.Program{Text: "readings go on after the first fail", PassRule: "hard bin 1, 2 or 3", RetestRule: "the last valid measurement counts"},
		Geometry:    reports.Geometry{DiameterMM: 100, DieWidthMM: 2.1, DieHeightMM: 2.33, EdgeExclusionMM: 3, CentreX: 0, CentreY: 0, Source: "product file"},
		Yield:       reports.LotYield{SystematicLoss: reports.NaN, RandomLoss: reports.NaN, LossWhy: "not computed yet", Baseline: 0.95},
		Quality: []reports.Quality{
			{Code: "clamped", Severity: "info", Text: "37 readings of BVCBO lie at the clamp of 80 V and count as at least", Dice: 37, Remedy: "Raise the clamp if the tail matters"},
			{Code: "bin-limit-disagree", Severity: "warning", Text: "6 dice pass by bin and fail a limit of the product file", Dice: 6, Remedy: "Compare the limits of the test program with the product file"},
			{Code: "retested", Severity: "info", Text: "375 dice were measured more than once", Dice: 375},
		},
		EpiWhy: "not asked for",
		Causes: []reports.Cause{
			{Cause: "epi-thickness", Direction: "low", Probability: 0.86, Loss: reports.Interval{Estimate: 0.07, Lower: 0.062, Upper: 0.079}, Wafers: []string{"03", "04", "05", "06"},
				For:     []reports.Evidence{{Text: "BVCEO is low in a bowl on four wafers of one reactor", LogOdds: 4.1, Test: "BVCEO", Wafers: []string{"03", "04", "05", "06"}}, {Text: "BVCBO does not move", LogOdds: 1.2, Test: "BVCBO"}},
				Against: []reports.Evidence{{Text: "VCESAT moves less than expected", LogOdds: -0.6, Test: "VCESAT"}},
				Next:    []reports.Next{{Text: "Cob at 30 V on ten dice from centre to edge of wafer 03", InformationBits: 0.8}}},
			{Cause: "edge-dice", Probability: 0.55, Loss: reports.Interval{Estimate: 0.02, Lower: 0.016, Upper: 0.024}},
		},
		Disposition: reports.Disposition{Proposal: "hold", Because: []string{"four wafers are far below the baseline", "one measurement would settle the cause"}, YieldIfFixed: reports.Interval{Estimate: 0.943, Lower: 0.936, Upper: 0.95},
			Wafers: []reports.WaferDisposition{{ID: "03", Proposal: "hold", Because: []string{"BVCEO fails in the centre"}}, {ID: "04", Proposal: "hold", Because: []string{"BVCEO fails in the centre"}}}},
		Cautions: []string{"High-voltage retest: interlock, current limit, discharge before touching, and a trained person; site rules come first."},
	}
}

// bareReport has nothing in it but its frame.
func bareReport() *reports.Report {
	nan := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: "no dice"}
	return &reports.Report{
		Schema: 1, Tool: reports.Tool{Name: "kneepoint", Version: "0.3.0"}, Lot: "empty",
		Geometry:    reports.Geometry{DiameterMM: reports.NaN, DieWidthMM: reports.NaN, DieHeightMM: reports.NaN, EdgeExclusionMM: reports.NaN, CentreX: reports.NaN, CentreY: reports.NaN, Why: "the data have no die coordinates"},
		Yield:       reports.LotYield{Interval: nan, Counting: nan, FirstPass: reports.NaN, SystematicLoss: reports.NaN, RandomLoss: reports.NaN, Baseline: reports.NaN},
		Pictures:    reports.Pictures{Why: "the data have no die coordinates"},
		Disposition: reports.Disposition{YieldIfFixed: nan},
	}
}
