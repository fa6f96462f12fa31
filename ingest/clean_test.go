package ingest

import (
	"fmt"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/config"
)

// retested is a wafer with a die measured four times (once without anything),
// one measured twice, and one whose rows are copies.
var retested = table("WAFER,X,Y,HBIN,PF,A [V],B [nA]",
	"1,0,0,5,F,10,1", // die 1, first
	"1,1,0,1,P,20,2", // die 2, first
	"1,2,0,1,P,30,3",
	"1,0,0,1,P,11,4", // die 1, second: passes
	"1,0,0,6,F,12,",  // die 1, third: fails
	"1,2,0,1,P,30,3", // a copy
	"1,1,0,,,,",      // die 2, nothing measured
	"1,0,0,,,NA,-",   // die 1, nothing measured
)

func TestRetestPolicies(t *testing.T) {
	nan := math.NaN()
	for _, c := range []struct {
		policy  Retest
		values  []float64 // of test A
		bins    []int32
		earlier []float64
		of      []int32
		first   []int32
	}{
		{RetestLast, []float64{20, 30, 12}, []int32{1, 1, 6}, []float64{nan, 10, 11, nan}, []int32{0, 2, 2, 2}, []int32{-1, -1, 1}},
		{RetestFirst, []float64{10, 20, 30}, []int32{5, 1, 1}, []float64{11, 12, nan, nan}, []int32{0, 0, 0, 1}, []int32{-1, -1, -1}},
		{RetestBest, []float64{20, 30, 11}, []int32{1, 1, 1}, []float64{nan, 10, 12, nan}, []int32{0, 2, 2, 2}, []int32{-1, -1, 1}},
	} {
		b := mustRead(t, retested, Options{Retest: c.policy})
		l := b.Lots[0]
		e := l.Earlier()
		if !cmp.Equal(c.values, l.Values(0), exactly) || !cmp.Equal(c.bins, l.HardBin()) {
			t.Errorf("%s: values %v bins %v, want %v %v", c.policy, l.Values(0), l.HardBin(), c.values, c.bins)
		}
		if !cmp.Equal(c.earlier, e.Values[0], exactly) || !cmp.Equal(c.of, e.Of) || !cmp.Equal(c.first, l.FirstPass().Index) {
			t.Errorf("%s: earlier %v of %v, first %v; want %v %v %v", c.policy, e.Values[0], e.Of, l.FirstPass().Index, c.earlier, c.of, c.first)
		}
		want := Tally{Rows: 8, Used: 8, Discarded: map[string]int{}, Measurements: 8, Dice: 3, Earlier: 4, Duplicates: 1}
		if d := cmp.Diff(want, b.Tally); d != "" {
			t.Errorf("%s: tally %s", c.policy, d)
		}
		if w := l.Wafers()[0]; w.Lo != 0 || w.Hi != 3 {
			t.Errorf("wafer %+v", w)
		}
	}
}

// Policy best asks the bins of the product file first.
func TestRetestBestByProductBins(t *testing.T) {
	p := &config.Product{Bins: config.Bins{Pass: []int{6}}}
	if v := mustRead(t, retested, Options{Retest: RetestBest, Product: p}).Lots[0].Values(0); v[2] != 12 {
		t.Errorf("values %v", v)
	}
}

// Without coordinates the part id tells dice apart; without either every row
// is a die of its own.
func TestRetestsWithoutCoordinates(t *testing.T) {
	rows := []string{"1,a,10", "1,b,20", "1,a,11", "2,a,12", "1,,13", "1,,14"}
	l := mustRead(t, table(append([]string{"WAFER,PART_ID,A"}, rows...)...), Options{}).Lots[0]
	if d := cmp.Diff([]float64{20, 11, 13, 14, 12}, l.Values(0)); d != "" {
		t.Error(d)
	}
	l = mustRead(t, table("WAFER,SITE,A", "1,1,10", "1,1,20", "1,1,30"), Options{}).Lots[0]
	if l.Len() != 3 {
		t.Errorf("%d dice, want 3", l.Len())
	}
}

// Rows without a test in common are parts of one measurement.
func TestJoinedRows(t *testing.T) {
	nan := math.NaN()
	b := mustRead(t, table("WAFER,X,Y,HBIN,A,B,C", "1,0,0,,1,,", "1,0,0,,,2,", "1,0,0,4,,,3", "1,1,0,1,5,,", "1,1,0,,,6,", "1,2,0,1,7,8,9"), Options{})
	l := b.Lots[0]
	got := [][]float64{l.Values(0), l.Values(1), l.Values(2)}
	if d := cmp.Diff([][]float64{{1, 5, 7}, {2, 6, 8}, {3, nan, 9}}, got, exactly); d != "" {
		t.Error(d)
	}
	if d := cmp.Diff([]int32{4, 1, 1}, l.HardBin()); d != "" {
		t.Error(d)
	}
	want := Tally{Rows: 6, Used: 6, Discarded: map[string]int{}, Measurements: 6, Dice: 3, Joined: 3}
	if d := cmp.Diff(want, b.Tally); d != "" || l.FirstPass().Index != nil || l.Findings()[0].Code != "joined-rows" {
		t.Errorf("%s %v", d, l.Findings())
	}
}

// Touchdown numbers that start again belong to a second pass: the later row
// counts. Where the file is sorted by place, the numbers tell.
func TestRetestOrder(t *testing.T) {
	again := table("WAFER,X,Y,TD,A", "1,0,0,1,10", "1,1,0,2,20", "1,2,0,3,30", "1,2,0,1,31", "1,0,0,2,11")
	l := mustRead(t, again, Options{}).Lots[0]
	if d := cmp.Diff(map[int32]float64{0: 11, 1: 20, 2: 31}, byX(l)); d != "" {
		t.Error(d)
	}
	var b strings.Builder
	b.WriteString("WAFER,X,Y,TD,A\n")
	for x := range 60 {
		fmt.Fprintf(&b, "1,%d,0,%d,%d\n1,%d,0,%d,%d\n", x, 200+x, 2, x, x, 1)
	}
	l = mustRead(t, b.String(), Options{}).Lots[0]
	for x, v := range byX(l) {
		if v != 2 {
			t.Fatalf("die %d has %v, want the reading with the higher touchdown number", x, v)
		}
	}
}

func byX(l *Lot) map[int32]float64 {
	m := map[int32]float64{}
	for i, x := range l.X() {
		m[x] = l.Values(0)[i]
	}
	return m
}

// In a long table a test that comes again is a retest, however the rows are
// sorted; what counts is the last reading of each test.
func TestLongRetests(t *testing.T) {
	head := "WAFER,X,Y,TEST,VALUE"
	for name, rows := range map[string][]string{
		"one after the other":  {"1,0,0,A,1", "1,0,0,B,2", "1,0,0,A,3", "1,0,0,B,4"},
		"by test":              {"1,0,0,A,1", "1,0,0,A,3", "1,0,0,B,2", "1,0,0,B,4"},
		"by test, dice mixed":  {"1,0,0,A,1", "1,1,0,A,9", "1,0,0,A,3", "1,0,0,B,2", "1,1,0,B,9", "1,0,0,B,4"},
		"stopped at the first": {"1,0,0,A,1", "1,0,0,A,3", "1,0,0,B,4"},
	} {
		b := mustRead(t, table(append([]string{head}, rows...)...), Options{})
		l := b.Lots[0]
		zero := slices.Index(l.X(), 0)
		if l.Values(0)[zero] != 3 || l.Values(1)[zero] != 4 || len(l.Earlier().Of) != 1 || l.Earlier().Values[0][0] != 1 {
			t.Errorf("%s: %v %v, earlier %v", name, l.Values(0), l.Values(1), l.Earlier())
		}
		if b.Tally.Used != len(rows) {
			t.Errorf("%s: tally %+v", name, b.Tally)
		}
	}
	// The touchdown tells measurements apart where rows share it.
	l := mustRead(t, table("WAFER,X,Y,TD,TEST,VALUE", "1,0,0,1,A,1", "1,0,0,1,B,2", "1,0,0,9,B,4", "1,0,0,9,C,5"), Options{}).Lots[0]
	if e := l.Earlier(); len(e.Of) != 1 || e.Values[0][0] != 1 || e.Values[1][0] != 2 || l.Values(1)[0] != 4 || l.Values(2)[0] != 5 || l.Values(0)[0] != 1 {
		t.Errorf("by touchdown: %v", viewOf(l))
	}
}

// A test that a retest did not measure again keeps its last reading, but for
// the tests after a stop at a fail.
func TestPartialRetests(t *testing.T) {
	nan := math.NaN()
	limits := "LSL,,,,,,22.5,80,1"
	for _, c := range []struct {
		name   string
		rows   []string // of die 4, 0: bin, flag, A, B, C
		want   []float64
		filled int
	}{
		{"no bins, other test again", []string{",,20,60,5", ",,,119,"}, []float64{20, 119, 5}, 1},
		{"no bins, all again", []string{",,20,60,5", ",,24,119,6"}, []float64{24, 119, 6}, 0},
		{"latest reading of each", []string{",,20,60,5", ",,21,,", ",,,119,"}, []float64{21, 119, 5}, 1},
		{"bin passes", []string{"5,,20,60,5", "1,,,119,"}, []float64{20, 119, 5}, 1},
		{"flag passes", []string{",F,20,60,5", ",P,,119,"}, []float64{20, 119, 5}, 1},
		{"bin stops", []string{"5,,20,60,5", "5,,,70,"}, []float64{20, 70, nan}, 1},
		{"stopped at the first", []string{"6,,24,60,5", "5,,21,,"}, []float64{21, nan, nan}, 0},
		{"no bins, stopped by its limit", []string{",,24,60,5", ",,21,,"}, []float64{21, nan, nan}, 0},
		{"retest without anything", []string{",,20,60,5", ",,,,"}, []float64{20, 60, 5}, 0},
		{"bin only", []string{"5,,20,60,5", "5,,,,"}, []float64{nan, nan, nan}, 0},
	} {
		lines := []string{"LOT,WAFER,X,Y,HBIN,PF,A,B,C", limits, "L,1,0,0,1,P,24.5,120,7"}
		for _, r := range c.rows {
			lines = append(lines, "L,1,4,0,"+r)
		}
		l := mustRead(t, table(lines...), Options{}).Lots[0]
		got := []float64{l.Values(0)[1], l.Values(1)[1], l.Values(2)[1]}
		filled := 0
		for _, f := range l.Findings() {
			if f.Code == "partial-retest" {
				filled += f.Dice
			}
		}
		if d := cmp.Diff(c.want, got, exactly); d != "" || filled != c.filled || len(l.Earlier().Of) != len(c.rows)-1 {
			t.Errorf("%s: %v, want %v; %d filled, want %d; earlier %v", c.name, got, c.want, filled, c.filled, l.Earlier())
		}
	}
	// Policy first takes nothing from later rows; a long table is no different.
	l := mustRead(t, table("WAFER,X,Y,A,B", "1,0,0,1,", "1,0,0,3,4"), Options{Retest: RetestFirst}).Lots[0]
	if l.Values(0)[0] != 1 || l.Values(1)[0] == l.Values(1)[0] {
		t.Errorf("policy first: %v %v", l.Values(0), l.Values(1))
	}
	l = mustRead(t, table("WAFER,X,Y,TEST,VALUE,LSL", "1,0,0,A,1,10", "1,0,0,B,2,10", "1,0,0,A,11,10"), Options{}).Lots[0]
	if l.Values(0)[0] != 11 || l.Values(1)[0] != 2 || l.Earlier().Values[0][0] != 1 || l.Earlier().Values[1][0] != 2 {
		t.Errorf("long: %v %v, earlier %v", l.Values(0), l.Values(1), l.Earlier())
	}
}

// Sites of a tester come again with every touchdown; they tell no dice apart.
func TestLongTableWithTesterSites(t *testing.T) {
	var b strings.Builder
	b.WriteString("WAFER,SITE,TEST,VALUE\n")
	for i := range 40 {
		fmt.Fprintf(&b, "1,%d,A,%d\n1,%d,B,%d\n", i%4, i, i%4, i)
	}
	if l := mustRead(t, b.String(), Options{}).Lots[0]; l.Len() != 40 || len(l.Earlier().Of) != 0 {
		t.Errorf("%d dice, %d earlier readings", l.Len(), len(l.Earlier().Of))
	}
}

func TestSentinels(t *testing.T) {
	r := rand.New(rand.NewPCG(2, 2))
	body := func(draw func() float64, extra ...float64) []float64 {
		v := append([]float64{}, extra...)
		for range 500 {
			v = append(v, draw())
		}
		return v
	}
	voltage := func() float64 { return 41.9 + 0.9*r.NormFloat64() }
	leak := func() float64 { return math.Exp(r.NormFloat64()) }
	big := func() float64 { return 2000 + 300*r.NormFloat64() }
	wild := func() float64 { return math.Exp(4 * r.NormFloat64()) }
	none := config.Unit{}
	for _, c := range []struct {
		name  string
		v     []float64
		unit  config.Unit
		clamp float64
		want  int
	}{
		{"-999 in a voltage", body(voltage, -999, -999), none, math.NaN(), 2},
		{"9999 in a voltage", body(voltage, 9999, 9999, 9999), none, math.NaN(), 3},
		{"once", body(voltage, 9999), none, math.NaN(), 0},
		{"two kinds", body(voltage, 9999, 9999, -999, -999, 1e30), none, math.NaN(), 5},
		{"99999 in a leakage", body(leak, 99999, 99999), none, math.NaN(), 2},
		{"-1e99 once", body(leak, -1e99), none, math.NaN(), 1},
		{"9.91e37 once", body(leak, 9.91e37), none, math.NaN(), 1},
		{"999 within the body", body(big, 999, 999, 999), none, math.NaN(), 0},
		{"999 in a wild tail", body(wild, 999, 999), none, math.NaN(), 0},
		{"the tester's clamp", body(voltage, 999, 999), none, 999, 0},
		{"all of them", []float64{-9999, -9999, -9999}, none, math.NaN(), 3},
		{"all of them, could be values", []float64{999, 999, 999}, none, math.NaN(), 0},
		{"negative values", body(func() float64 { return -voltage() }, -999, -999, -999), none, math.NaN(), 3},
		{"negative values near it", body(func() float64 { return -900 + 50*r.NormFloat64() }, -999, -999), none, math.NaN(), 0},
	} {
		v := append([]float64{}, c.v...)
		got := 0
		for _, s := range findSentinels(v, survey(v, nil), []config.Unit{c.unit}, c.clamp, math.NaN()) {
			got += s.n
		}
		missing := 0
		for _, x := range v {
			if x != x {
				missing++
			}
		}
		if got != c.want || missing != c.want {
			t.Errorf("%s: %d sentinels, %d missing, want %d", c.name, got, missing, c.want)
		}
	}
}

// A value in a file is the sentinel, whatever unit the file has.
func TestSentinelInUnit(t *testing.T) {
	for _, u := range []string{"nA", "A", "pA"} {
		l := mustRead(t, strings.NewReplacer("ICBO", "ICBO ["+u+"]", "0.1\n", "9999.9\n", "0.2\n", "9999.9\n").Replace(plain()), Options{}).Lots[0]
		if v := l.Values(1); v[0] == v[0] || v[1] == v[1] || v[2] != v[2] {
			t.Errorf("%s: %v", u, v)
		}
		if f := l.Findings()[0]; f.Code != "sentinel" || !strings.Contains(f.Text, "2 readings are 9999.9 "+u) {
			t.Errorf("%s: %+v", u, f)
		}
	}
}

// Clamp and floor of the product file mark values as bounds; a value below the
// floor is at most the floor.
func TestClampOfTheProduct(t *testing.T) {
	p := aProduct(config.Test{Name: "A", Unit: unit("V"), Clamp: 80, Floor: 0.5})
	l := mustRead(t, table("WAFER,X,Y,A [mV]", "1,0,0,80000", "1,1,0,79999.99", "1,2,0,79990", "1,3,0,500", "1,4,0,-3", "1,6,0,80100"), Options{Product: p}).Lots[0]
	if d := cmp.Diff([]int8{1, 1, 0, -1, -1, 1}, l.Censor(0)); d != "" {
		t.Error(d)
	}
	if d := cmp.Diff([]float64{80, 79999.99 / 1e3, 79.99, 0.5, 0.5, 80.1}, l.Values(0), exactly); d != "" {
		t.Error(d)
	}
	if x := l.Tests()[0]; x.Clamp != 80 || x.Floor != 0.5 {
		t.Errorf("test %+v", x)
	}
}

func TestClampFound(t *testing.T) {
	r := rand.New(rand.NewPCG(5, 5))
	tab := NewTable("L", Test{Name: "BVCBO", Unit: unit("V"), Lower: math.NaN(), Upper: math.NaN(), Clamp: math.NaN(), Floor: math.NaN()})
	at := 0
	for i := range 400 {
		v := math.Min(43, math.Round(1000*(41.9+0.9*r.NormFloat64()))/1000)
		if v == 43 {
			at++
		}
		tab.Add(Die{Wafer: "1", X: int32(i % 20), Y: int32(i / 20), HardBin: 1, Values: []float64{v}})
	}
	l, err := Build(tab, Options{})
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for i, c := range l.Censor(0) {
		if (c == 1) != (l.Values(0)[i] == 43) || c < 0 {
			t.Fatalf("die %d of %v marked %d", i, l.Values(0)[i], c)
		}
		n += int(c)
	}
	if f := l.Findings(); n != at || l.Tests()[0].Clamp != 43 || len(f) != 1 || f[0].Code != "clamped" || f[0].Dice != at ||
		!strings.HasPrefix(f[0].Text, fmt.Sprintf("test BVCBO: %d readings stand at 43 V, the largest value of the lot", at)) {
		t.Errorf("%d marked, %d at the clamp, %+v", n, at, f)
	}
}

// Dice off the wafer stay and are counted; half a wafer, or five sites, are
// none.
func TestOffWafer(t *testing.T) {
	disc := func(keep func(x, y int) bool, extra ...[2]int32) *Table {
		tab := NewTable("L", Test{Name: "A", Lower: math.NaN(), Upper: math.NaN(), Clamp: math.NaN(), Floor: math.NaN()})
		for y := -20; y <= 20; y++ {
			for x := -20; x <= 20; x++ {
				if x*x+y*y <= 400 && keep(x, y) {
					tab.Add(Die{Wafer: "1", X: int32(100 + x), Y: int32(50 + y), Values: []float64{float64(x*x + 3*y)}})
				}
			}
		}
		for _, e := range extra {
			tab.Add(Die{Wafer: "1", X: e[0], Y: e[1], Values: []float64{1}})
		}
		return tab
	}
	all := func(x, y int) bool { return true }
	known := &config.Product{Wafer: config.Wafer{DiameterMM: 100, DieWidthMM: 2.5, DieHeightMM: 2.5}}
	for _, c := range []struct {
		name  string
		table *Table
		want  int
	}{
		{"whole", disc(all), 0},
		{"half", disc(func(x, y int) bool { return x < 0 }), 0},
		{"quarter", disc(func(x, y int) bool { return x < 0 && y > 3 }), 0},
		{"five sites", disc(func(x, y int) bool {
			return x == 0 && (y == 0 || y == 15 || y == -15) || y == 0 && (x == 15 || x == -15)
		}), 0},
		{"one off", disc(all, [2]int32{999, 50}), 1},
		{"three off", disc(all, [2]int32{999, 50}, [2]int32{-400, 0}, [2]int32{100, 1000}), 3},
	} {
		for _, p := range []*config.Product{nil, known} {
			l, err := Build(c.table, Options{Product: p})
			if err != nil {
				t.Fatal(err)
			}
			n := 0
			for _, f := range l.Findings() {
				if f.Code == "off-wafer" {
					n += f.Dice
				}
			}
			if n != c.want || l.Len() != len(c.table.Wafer) {
				t.Errorf("%s, size known %v: %d off the wafer, want %d", c.name, p != nil, n, c.want)
			}
		}
	}
	// Known size: just beyond a die outside the radius.
	l, _ := Build(disc(all, [2]int32{100 + 22, 50}), Options{Product: known})
	if f := l.Findings(); len(f) != 1 || f[0].Dice != 1 {
		t.Errorf("a die at 55 mm of a 50 mm radius: %+v", f)
	}
}

// The smallest circle against the definition: it holds all points, and two or
// three of them lie on it.
func TestSmallestCircle(t *testing.T) {
	r := rand.New(rand.NewPCG(8, 8))
	for range 200 {
		p := make([]point, 1+r.IntN(30))
		for i := range p {
			p[i] = point{float64(r.IntN(20)), float64(r.IntN(20))}
		}
		c, radius := smallestCircle(p)
		on := 0
		for _, q := range p {
			d := math.Hypot(q.x-c.x, q.y-c.y)
			if d > radius+1e-9 {
				t.Fatalf("point %v outside circle %v %v of %v", q, c, radius, p)
			}
			if d > radius-1e-9 {
				on++
			}
		}
		if on < min(2, len(p)) {
			t.Fatalf("only %d points on circle %v %v of %v", on, c, radius, p)
		}
	}
}

func TestBuild(t *testing.T) {
	nan := math.NaN()
	tab := &Table{Lot: "L1", Product: "P", Wafer: []string{"10", "2", "2", "2"}, X: []int32{0, 0, 1, 0}, Y: []int32{0, 0, 0, 0},
		Site: []int32{1, 1, 2, 1}, HardBin: []int32{1, 5, 1, 1}, Pass: []int8{1, 0, 1, 1},
		Tests:  []Test{{Name: "A", Unit: unit("nA"), Lower: nan, Upper: 5e-9, Clamp: nan, Floor: nan}, {Name: "B", Lower: nan, Upper: nan, Clamp: nan, Floor: nan}},
		Values: [][]float64{{1e-9, 2e-9, 3e-9, 4e-9}, {1.5, nan, 2.5, 3.5}}, Attributes: map[string]string{"fab": "N"},
		Columns: map[string][]string{"REACTOR": {"R1", "R2", "R2", "R2"}}, Inputs: []Input{{File: "made"}}}
	p := aProduct(config.Test{Name: "b", Lower: 1})
	l, err := Build(tab, Options{Product: p})
	if err != nil {
		t.Fatal(err)
	}
	got := viewOf(l)
	want := view{ID: "L1", Product: "P", Wafers: []Wafer{{"2", 0, 2, map[string]string{"REACTOR": "R2"}}, {"10", 2, 3, map[string]string{"REACTOR": "R1"}}},
		Values: [][]float64{{2.5, 3.5, 1.5}, {3e-9, 4e-9, 1e-9}}, Censor: [][]int8{nil, nil}, X: []int32{1, 0, 0}, Y: []int32{0, 0, 0}, Site: []int32{2, 1, 1},
		Touchdown: []int32{2, 3, 1}, HardBin: []int32{1, 1, 1}, Pass: []int8{1, 1, 1},
		Earlier:   Earlier{Of: []int32{1}, HardBin: []int32{5}, SoftBin: []int32{Missing}, Pass: []int8{0}, Values: [][]float64{{nan}, {2e-9}}},
		FirstPass: FirstPass{Index: []int32{-1, 0, -1}}, Attributes: map[string]string{"fab": "N"}, Tests: l.Tests(), Findings: l.Findings(), DieAttributes: map[string][]string{}}
	if d := cmp.Diff(want, got, exactly); d != "" {
		t.Errorf("(-want +got)\n%s", d)
	}
	if x := l.Tests(); x[0].Name != "b" || x[0].Lower != 1 || x[0].LimitsFrom != "product file" || x[1].Upper != 5e-9 || x[1].LimitsFrom != "data file" || l.Inputs()[0].File != "made" {
		t.Errorf("tests %+v, inputs %v", x, l.Inputs())
	}
	l.Values(0)[0] = 7 // only here: to see that nothing is shared
	if tab.Values[1][2] != 2.5 || tab.X[0] != 0 {
		t.Error("the lot shares memory with the table")
	}
	if _, err := Build(NewTable("L"), Options{}); err == nil {
		t.Error("no error for an empty table")
	}
}

// Every row of messy files of many kinds is used or counted.
func TestEveryRowIsAccountedFor(t *testing.T) {
	r := rand.New(rand.NewPCG(6, 6))
	for range 60 {
		var b strings.Builder
		rows := 0
		b.WriteString("LOT,WAFER,X,Y,HBIN,BV,LEAK\n")
		for range 200 {
			rows++
			key := fmt.Sprintf("L%d,%d,%d,%d,%d", r.IntN(2), 1+r.IntN(2), r.IntN(8), r.IntN(8), 1+r.IntN(2))
			switch r.IntN(12) {
			case 0:
				b.WriteString(",,,,,,\n")
			case 1:
				b.WriteString("LOT,WAFER,X,Y,HBIN,BV,LEAK\n")
			case 2:
				b.WriteString(key + ",1,2,3,4\n")
			case 3:
				b.WriteString(key + "\n")
			case 4:
				b.WriteString("L1,,1,1,1,1,1\n")
			case 5:
				b.WriteString(key + ",,NA\n")
			case 6:
				b.WriteString("# comment\n\n")
				rows--
			default:
				fmt.Fprintf(&b, "%s,%d,%d\n", key, r.IntN(3), r.IntN(2))
			}
		}
		for _, opt := range []Options{{}, {Lot: "L1", block: 500}} {
			y := mustRead(t, b.String(), opt).Tally
			sum := y.Used
			for _, n := range y.Discarded {
				sum += n
			}
			if y.Rows != rows || sum != rows || y.Used != y.Measurements || y.Measurements != y.Dice+y.Earlier+y.Duplicates+y.Joined {
				t.Fatalf("%d rows: tally %+v", rows, y)
			}
			if (y.Discarded["other-lot"] > 0) != (opt.Lot != "") {
				t.Fatalf("tally %+v", y)
			}
		}
	}
}

// Readings beyond the tester's range are bounds, not missing.
func TestOverRange(t *testing.T) {
	nan := math.NaN()
	clamp := aProduct(config.Test{Name: "A", Unit: unit("V"), Clamp: 80, Floor: 0.5})
	for _, c := range []struct {
		name    string
		cells   string // of test A, blanks between them
		product *config.Product
		limits  string // lower upper, _ for none
		want    []float64
		marks   []int8
		codes   string
	}{
		{"bounds", ">1000 <0.01 >=5 <=6e-3 7", nil, "_ _", []float64{1000, 0.01, 5, 6e-3, 7}, []int8{1, -1, 1, -1, 0}, "over-range:4"},
		{"negative bound", ">-1234.5678901 <-3 7", nil, "_ _", []float64{-1234.5678901, -3, 7}, []int8{1, -1, 0}, "over-range:2"},
		{"words, no limit", "OL 3 7 OVERRANGE over", nil, "_ _", []float64{7, 3, 7, 7, 7}, []int8{1, 0, 0, 1, 1}, "over-range:3"},
		{"words, limit above", "OVL 3 7", nil, "_ 10", []float64{math.Nextafter(10, 11), 3, 7}, []int8{1, 0, 0}, "over-range:1"},
		{"words, limit below", "OVR 3 7", nil, "_ 5", []float64{7, 3, 7}, []int8{1, 0, 0}, "over-range:1"},
		{"words, clamp", "OL 3 7", clamp, "_ 5", []float64{80, 3, 7}, []int8{1, 0, 0}, "over-range:1"},
		{"words, floor", "UNDER 3 7", clamp, "_ _", []float64{0.5, 3, 7}, []int8{-1, 0, 0}, "over-range:1"},
		{"clamp that cannot be", "OL 3 97", clamp, "_ _", []float64{97, 3, 97}, []int8{1, 0, 0}, "over-range:1 above-clamp:1"},
		{"infinite", "inf 1e999 -inf -1e999 3 7", nil, "2 9", []float64{math.Nextafter(9, 10), math.Nextafter(9, 10), math.Nextafter(2, 1), math.Nextafter(2, 1), 3, 7}, []int8{1, 1, -1, -1, 0, 0}, "over-range:2"},
		{"nothing to go by", "OL OL", nil, "_ _", []float64{nan, nan}, nil, "over-range:2 missing:2"},
		{"nothing but a limit", "OL OL", nil, "_ 4", []float64{math.Nextafter(4, 5), math.Nextafter(4, 5)}, []int8{1, 1}, "over-range:2"},
	} {
		lines := []string{"WAFER,X,Y,B,A"}
		limits := strings.Fields(strings.ReplaceAll(c.limits, "_", "-"))
		lines = append(lines, "LSL,,,,"+limits[0], "USL,,,,"+limits[1])
		for i, v := range strings.Fields(c.cells) {
			lines = append(lines, fmt.Sprintf("1,%d,0,%d,%s", i, i, v))
		}
		l := mustRead(t, table(lines...), Options{Product: c.product}).Lots[0]
		k := l.TestIndex("A")
		if d := cmp.Diff(c.want, l.Values(k), exactly); d != "" {
			t.Errorf("%s: %s", c.name, d)
		}
		if d := cmp.Diff(c.marks, l.Censor(k)); d != "" {
			t.Errorf("%s: %s", c.name, d)
		}
		have := ""
		for _, f := range l.Findings() {
			have += f.Code + ":" + digitsOf(f.Dice) + " "
		}
		for _, code := range strings.Fields(c.codes) {
			if !strings.Contains(have, code+" ") {
				t.Errorf("%s: no %s in %s", c.name, code, have)
			}
		}
	}
	// In the file's unit, in long tables and through retests.
	l := mustRead(t, table("WAFER,X,Y,TEST,VALUE,UNIT", "1,0,0,I,5,nA", "1,1,0,I,>1000,nA", "1,2,0,I,<2.5,uA", "1,1,0,V,1,V", "1,1,0,V,2,V"), Options{}).Lots[0]
	if d := cmp.Diff([]float64{5e-9, 2.5e-6, 1000e-9}, l.Values(0), exactly); d != "" || !cmp.Equal(l.Censor(0), []int8{0, -1, 1}) {
		t.Errorf("long: %s %v", d, l.Censor(0))
	}
}

// What a limited test loses is a warning that says what cannot be judged.
func TestUnjudged(t *testing.T) {
	for _, c := range []struct {
		limit string
		want  bool
	}{{"5", true}, {"", false}} {
		for _, f := range mustRead(t, table("WAFER,X,Y,A", "USL,,,"+c.limit, "1,0,0,-9999", "1,1,0,3", "1,2,0,x7", "1,3,0,-9999"), Options{}).Lots[0].Findings() {
			if f.Code != "sentinel" && f.Code != "unreadable-value" {
				continue
			}
			if f.Severity != Warning || strings.Contains(f.Text, "cannot be judged on this test") != c.want {
				t.Errorf("limit %q: %+v", c.limit, f)
			}
		}
	}
}
