package stdf

import (
	"bytes"
	"fmt"
	"math"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

// partLines reads a file to one line a part, and the damages.
func partLines(t testing.TB, file []byte) ([]string, *Parts) {
	t.Helper()
	p := NewParts(NewReader(bytes.NewReader(file)))
	var lines []string
	for p.Scan() {
		part := p.Part()
		var b strings.Builder
		fmt.Fprintf(&b, "%d: run %d wafer %d %q h%d s%d hb %s sb %s x %s y %s pass %d id %q", part.Number, part.Run, part.Wafer, part.WaferID,
			part.Head, part.Site, num(part.HardBin), num(part.SoftBin), num(part.X), num(part.Y), part.Pass(), part.ID())
		for _, r := range part.Results {
			fmt.Fprintf(&b, " %s=%g", p.Tests()[r.Test].Text, r.Value())
		}
		if !part.HasPIR {
			b.WriteString(" no PIR")
		}
		if part.Damaged {
			b.WriteString(" damaged")
		}
		lines = append(lines, b.String())
	}
	if p.Err() != nil {
		t.Fatalf("reading: %v", p.Err())
	}
	return lines, p
}

func num(n int32) string {
	if n == Missing {
		return "-"
	}
	return itoa(int(n))
}

// kindsOf lists the damages by kind and offset.
func kindsOf(p *Parts) string {
	var s []string
	for _, d := range p.Damages() {
		s = append(s, string(d.Kind))
	}
	return strings.Join(s, " ")
}

func pir(site uint8) *PIR { return &PIR{Head: 1, Site: site} }
func prr(site uint8, id string) *PRR {
	return &PRR{Head: 1, Site: site, HardBin: 1, SoftBin: NoBin, X: NoCoordinate, Y: NoCoordinate, PartID: []byte(id)}
}
func res(site uint8, text string, v float32) *PTR {
	return &PTR{Number: uint32(text[0]), Head: 1, Site: site, Result: v, Text: text}
}

// Three sites on two heads, mixed in every way that PIR and PRR allow.
func TestSitesMixed(t *testing.T) {
	other := func(rec Record) Record { // the same on head 2
		switch m := rec.(type) {
		case *PIR:
			m.Head = 2
		case *PTR:
			m.Head = 2
		case *PRR:
			m.Head = 2
		case *WIR:
			m.Head = 2
		}
		return rec
	}
	for _, order := range []Order{LittleEndian, BigEndian} {
		lines, p := partLines(t, write(t, order,
			&MIR{LotID: "LOT-7"}, &WIR{Head: 1, WaferID: "01"}, other(&WIR{WaferID: "02 "}),
			pir(1), pir(2), other(pir(1)),
			res(1, "A", 1), other(res(1, "A", 21)), res(2, "A", 11), res(2, "B", 12), res(1, "B", 2),
			&PRR{Head: 1, Site: 1, Flag: PartFailed, HardBin: 5, SoftBin: 51, X: -3, Y: 7, PartID: []byte("p1"), Tests: 2, TestTime: 35},
			pir(1), res(1, "A", 31), other(res(1, "B", 22)), prr(2, "p2"), other(prr(1, "p3")), prr(1, "p4"),
			&MRR{},
		))
		want := []string{
			`1: run 0 wafer 0 "01" h1 s1 hb 5 sb 51 x -3 y 7 pass 0 id "p1" A=1 B=2`,
			`2: run 0 wafer 0 "01" h1 s2 hb 1 sb - x - y - pass 1 id "p2" A=11 B=12`,
			`3: run 0 wafer 1 "02" h2 s1 hb 1 sb - x - y - pass 1 id "p3" A=21 B=22`,
			`4: run 0 wafer 0 "01" h1 s1 hb 1 sb - x - y - pass 1 id "p4" A=31`,
		}
		if diff := cmp.Diff(want, lines); diff != "" {
			t.Errorf("parts (want -, got +):\n%s", diff)
		}
		if len(p.Damages()) > 0 || p.Orphans() != 0 {
			t.Errorf("damages %v, orphans %d", p.Damages(), p.Orphans())
		}
		run := p.Runs()[0]
		if run.Parts != 4 || run.Good != 3 || len(run.Sites) != 3 || run.Sites[0].Parts != 2 || !run.HasMIR || run.MRR == nil {
			t.Errorf("run %+v", run)
		}
	}
}

func TestPartFlags(t *testing.T) {
	lines, p := partLines(t, write(t, LittleEndian, &MIR{},
		pir(1), &PRR{Head: 1, Site: 1, Flag: RetestID, HardBin: NoBin, SoftBin: 0, X: 0, Y: 0},
		pir(1), &PRR{Head: 1, Site: 1, Flag: RetestXY | AbnormalEnd, HardBin: 0, SoftBin: NoBin, X: 32767, Y: -32767},
		pir(1), &PRR{Head: 1, Site: 1, Flag: PartFailed | PartResultInvalid, HardBin: 1, SoftBin: 1}, &MRR{}))
	want := []string{
		`1: run 0 wafer 0 "" h1 s1 hb - sb 0 x 0 y 0 pass 1 id ""`,
		`2: run 0 wafer 0 "" h1 s1 hb 0 sb - x 32767 y -32767 pass 1 id ""`,
		`3: run 0 wafer 0 "" h1 s1 hb 1 sb 1 x 0 y 0 pass -1 id ""`,
	}
	if diff := cmp.Diff(want, lines); diff != "" {
		t.Errorf("parts (want -, got +):\n%s", diff)
	}
	if run := p.Runs()[0]; run.Retested != 2 || run.Good != 2 || p.Wafers()[0].Retested != 2 {
		t.Errorf("run %+v", run)
	}
	if !RetestID.Retest() || !RetestXY.Retest() || AbnormalEnd.Retest() {
		t.Error("Retest")
	}
}

// Results that must not be used are NaN; NaN and infinite ones come through.
func TestResultValues(t *testing.T) {
	ptr := func(flag TestFlag, parm ParmFlag, v float64) *PTR {
		return &PTR{Number: 'A', Head: 1, Site: 1, Flag: flag, Parm: parm, Result: float32(v), Text: "A"}
	}
	lines, _ := partLines(t, write(t, BigEndian, &MIR{}, ptr(NotExecuted, 0, 3), // defines defaults only
		pir(1), ptr(0, 0, 1), ptr(Failed, AboveLimit, 2), ptr(ResultInvalid, 0, 3), ptr(NotExecuted|PassFailInvalid, 0, 4), ptr(Alarm, 0, 5),
		ptr(0, Oscillation, 6), ptr(0, 0, math.NaN()), ptr(Failed, 0, math.Inf(1)), ptr(0, 0, math.Inf(-1)), prr(1, ""),
		// MPR: a result for each pin; none at all is still a pass or fail
		pir(1), &MPR{Number: 5, Head: 1, Site: 1, Text: "M", Results: []float32{7, 8}}, &MPR{Number: 5, Head: 1, Site: 1},
		&MPR{Number: 5, Head: 1, Site: 1, Flag: Timeout, Results: []float32{9}}, prr(1, ""),
		pir(1), &FTR{Number: 6, Head: 1, Site: 1, Text: "F"}, &FTR{Number: 6, Head: 1, Site: 1, Flag: Failed},
		&FTR{Number: 6, Head: 1, Site: 1, Flag: Failed | PassFailInvalid}, &FTR{Number: 6, Head: 1, Site: 1, Flag: NotExecuted}, prr(1, ""), &MRR{}))
	for i, want := range []string{
		"A=1 A=2 A=NaN A=NaN A=NaN A=NaN A=NaN A=+Inf A=-Inf", "M=7 M=8 M=NaN M=NaN", "F=1 F=0 F=NaN F=NaN",
	} {
		if !strings.HasSuffix(lines[i], `id "" `+want) {
			t.Errorf("part %d: %s, want %s", i, lines[i], want)
		}
	}
}

func TestColumnNames(t *testing.T) {
	_, p := partLines(t, write(t, LittleEndian, &MIR{},
		&PMR{Index: 1, Channel: "ch1", Physical: "7", Logical: "BASE", Head: 1, Site: 1}, &PMR{Index: 2, Channel: "ch2", Head: 1, Site: 1},
		pir(1), &MPR{Number: 5, Head: 1, Site: 1, Results: []float32{1, 2, 3, 4}, Text: "M",
			Optional: &MPROptional{Optional: Optional{Present: 16, Flag: NoStart}, Pins: []uint16{1, 2, 9, 0}}}, prr(1, ""), &MRR{}))
	test := p.Tests()[0]
	var names []string
	for i := range test.Columns + 1 {
		names = append(names, p.ColumnName(test, i))
	}
	if got := strings.Join(names, ","); got != "BASE,ch2,pin 9,#4,#5" {
		t.Errorf("columns %s", got)
	}
}

// Parts that were not opened or not closed, results of nobody: all counted.
func TestPartsOutOfOrder(t *testing.T) {
	for _, c := range []struct {
		name    string
		recs    []Record
		lines   []string
		kinds   string
		orphans int64
	}{
		{"PRR without PIR, with results", []Record{&MIR{}, res(1, "A", 1), prr(1, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p" A=1 no PIR`}, "part-not-opened", 0},
		{"PRR alone", []Record{&MIR{}, prr(1, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p" no PIR`}, "part-not-opened", 0},
		{"PRR of another site", []Record{&MIR{}, pir(1), res(1, "A", 1), prr(2, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s2 hb 1 sb - x - y - pass 1 id "p" no PIR`}, "part-not-opened part-not-closed", 1},
		{"PIR twice", []Record{&MIR{}, pir(1), res(1, "A", 1), pir(1), res(1, "A", 2), prr(1, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p" A=2`}, "part-not-closed", 1},
		{"PIR open at the end", []Record{&MIR{}, pir(1), res(1, "A", 1), res(1, "A", 1), &MRR{}}, nil, "part-not-closed", 2},
		{"results of nobody", []Record{&MIR{}, pir(1), prr(1, "p"), res(1, "A", 2), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p"`}, "results-of-nobody", 1},
		{"results before a PIR are not its part's", []Record{&MIR{}, res(1, "A", 2), pir(1), res(1, "A", 3), prr(1, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p" A=3`}, "results-of-nobody", 1},
		{"no MIR", []Record{pir(1), prr(1, "p"), &MRR{}},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p"`}, "no-mir", 0},
		{"no MRR", []Record{&MIR{}, pir(1), prr(1, "p")},
			[]string{`1: run 0 wafer 0 "" h1 s1 hb 1 sb - x - y - pass 1 id "p"`}, "no-mrr", 0},
	} {
		lines, p := partLines(t, write(t, LittleEndian, c.recs...))
		if diff := cmp.Diff(c.lines, lines); diff != "" {
			t.Errorf("%s (want -, got +):\n%s", c.name, diff)
		}
		if got := kindsOf(p); got != c.kinds || p.Orphans() != c.orphans {
			t.Errorf("%s: damages %q, %d orphans, want %q, %d", c.name, got, p.Orphans(), c.kinds, c.orphans)
		}
	}
}

func TestWafers(t *testing.T) {
	// Wafer 01; one that only its WRR names; one without either; 01 again.
	_, p := partLines(t, write(t, LittleEndian, &MIR{},
		&WIR{Head: 1, WaferID: "01"}, pir(1), prr(1, ""), pir(1), prr(1, ""), &WRR{Head: 1, Parts: 2, Good: 2, WaferID: "01"},
		pir(1), prr(1, ""), &WRR{Head: 1, Parts: NoCount, Good: NoCount, WaferID: "02"},
		pir(1), prr(1, ""),
		&WIR{Head: 1, WaferID: "01"}, pir(1), prr(1, ""), &MRR{}))
	var got []string
	for _, w := range p.Wafers() {
		got = append(got, fmt.Sprintf("%d %q %d parts, WIR %v, WRR %v", w.Index, w.ID, w.Parts, w.WIR != nil, w.WRR != nil))
	}
	want := []string{
		`0 "01" 2 parts, WIR true, WRR true`, `1 "02" 1 parts, WIR false, WRR true`, `2 "" 1 parts, WIR false, WRR false`,
		`3 "01" 1 parts, WIR true, WRR false`,
	}
	if diff := cmp.Diff(want, got); diff != "" {
		t.Errorf("wafers (want -, got +):\n%s", diff)
	}
	if len(p.Damages()) > 0 {
		t.Errorf("damages %v", p.Damages())
	}
}

func TestCountsDisagree(t *testing.T) {
	parts := func(n int, flag PartFlag) (recs []Record) {
		for range n {
			m := prr(1, "")
			m.Flag = flag
			recs = append(recs, pir(1), m)
		}
		return recs
	}
	file := func(recs ...[]Record) []byte {
		all := []Record{&MIR{}, &WIR{Head: 1, WaferID: "W"}}
		for _, r := range recs {
			all = append(all, r...)
		}
		return write(t, LittleEndian, append(all, &MRR{})...)
	}
	one := func(rec Record) []Record { return []Record{rec} }
	for _, c := range []struct {
		name string
		file []byte
		want int
	}{
		{"as many", file(parts(3, 0), one(&WRR{Head: 1, Parts: 3, Good: 3}), one(&PCR{Head: 1, Site: 1, Parts: 3, Good: 3}),
			one(&PCR{Head: AllSites, Parts: 3, Good: 3})), 0},
		{"missing counts", file(parts(3, 0), one(&WRR{Head: 1, Parts: NoCount, Good: NoCount}), one(&PCR{Head: 1, Site: 1, Parts: NoCount, Good: NoCount})), 0},
		{"more than there are", file(parts(3, 0), one(&WRR{Head: 1, Parts: 4, Good: NoCount})), 1},
		{"another number of good ones", file(parts(2, 0), parts(1, PartFailed), one(&WRR{Head: 1, Parts: 3, Good: 3})), 1},
		{"retests counted", file(parts(2, PartFailed), parts(2, RetestXY), one(&WRR{Head: 1, Parts: 4, Good: 9})), 0},
		{"retests not counted", file(parts(2, PartFailed), parts(2, RetestXY), one(&WRR{Head: 1, Parts: 2, Good: 2})), 0},
		{"retests half counted", file(parts(2, PartFailed), parts(2, RetestXY), one(&WRR{Head: 1, Parts: 3, Good: 2})), 1},
		{"a site", file(parts(3, 0), one(&PCR{Head: 1, Site: 1, Parts: 2, Good: 3})), 1},
		{"a site without parts", file(parts(3, 0), one(&PCR{Head: 1, Site: 2, Parts: 2, Good: 0})), 1},
		{"all sites", file(parts(3, 0), one(&PCR{Head: AllSites, Parts: 2, Good: 2})), 2},
	} {
		_, p := partLines(t, c.file)
		n := 0
		for _, d := range p.DamageCounts() {
			if d.Kind != DamageCounts {
				t.Errorf("%s: %v", c.name, p.Damages())
			}
			n += int(d.Count)
		}
		if n != c.want {
			t.Errorf("%s: %d findings, want %d: %v", c.name, n, c.want, p.Damages())
		}
	}
}

func TestBins(t *testing.T) {
	_, p := partLines(t, write(t, LittleEndian, &MIR{}, pir(1), prr(1, ""), pir(1), prr(1, ""),
		pir(1), &PRR{Head: 1, Site: 1, HardBin: 7, SoftBin: 70, Flag: PartFailed},
		&HBR{Head: 1, Site: 1, Number: 1, Count: 1, PassFail: 'P', Name: "good "}, &HBR{Head: 1, Site: 2, Number: 1, Count: 1, PassFail: ' '},
		&SBR{Head: 1, Site: 1, Number: 70, Count: 5, PassFail: 'F', Name: "open"}, &SBR{Head: AllSites, Number: 70, Count: 1, PassFail: 'F'},
		&SBR{Head: 1, Site: 2, Number: 70, Count: 5}, &MRR{}))
	run := p.Runs()[0]
	got := fmt.Sprintf("%v %v", binLines(run.HardBins), binLines(run.SoftBins))
	if want := `[1 "good" P claimed 2 parts 2 7 "" ' ' claimed -1 parts 1] [70 "open" F claimed 1 parts 1]`; got != strings.ReplaceAll(want, "' '", " ") {
		t.Errorf("bins %s", got)
	}
}

func binLines(bins []Bin) (lines []string) {
	for _, b := range bins {
		lines = append(lines, fmt.Sprintf("%d %q %c claimed %d parts %d", b.Number, b.Name, b.PassFail, b.Claimed, b.Parts))
	}
	return lines
}

// Files that were appended to each other, in other byte orders too.
func TestAppendedFiles(t *testing.T) {
	one := func(order Order, lot string) []byte {
		return write(t, order, &MIR{LotID: lot}, &WIR{Head: 1, WaferID: lot + "-1"}, pir(1), res(1, "A", 1), prr(1, lot),
			&WRR{Head: 1, Parts: 1, Good: 1}, &PCR{Head: 1, Site: 1, Parts: 1, Good: 1}, &MRR{})
	}
	file := bytes.Join([][]byte{one(LittleEndian, "A"), one(BigEndian, "B"), one(BigEndian, "C"), one(LittleEndian, "D")}, nil)
	lines, p := partLines(t, file)
	var want []string
	for i, lot := range []string{"A", "B", "C", "D"} {
		want = append(want, fmt.Sprintf(`%d: run %d wafer %d "%s-1" h1 s1 hb 1 sb - x - y - pass 1 id "%s" A=1`, i+1, i, i, lot, lot))
	}
	if diff := cmp.Diff(want, lines); diff != "" {
		t.Errorf("parts (want -, got +):\n%s", diff)
	}
	if len(p.Damages()) > 0 || len(p.Runs()) != 4 || p.Runs()[2].MIR.LotID != "C" {
		t.Errorf("damages %v, %d runs", p.Damages(), len(p.Runs()))
	}
	// A MIR that follows another at once replaces it.
	_, p = partLines(t, write(t, LittleEndian, &MIR{LotID: "typo"}, &MIR{LotID: "LOT-7"}, pir(1), prr(1, ""), &MRR{}))
	if len(p.Runs()) != 1 || p.Runs()[0].MIR.LotID != "LOT-7" || len(p.Damages()) > 0 {
		t.Errorf("MIR twice: %d runs, %v", len(p.Runs()), p.Damages())
	}
}

func TestWatch(t *testing.T) {
	p := NewParts(NewReader(bytes.NewReader(write(t, LittleEndian, &MIR{}, &DTR{Text: "a"}, pir(1), &DTR{Text: "b"}, prr(1, ""), &MRR{}))))
	var got []string
	p.Watch = func(rec Record) { got = append(got, rec.Kind().String()) }
	for p.Scan() {
	}
	if s := strings.Join(got, " "); s != "FAR MIR DTR DTR MRR" {
		t.Errorf("watched %s", s)
	}
}

// The made file must come out as it went in, whatever its writer left out.
func TestMadeFile(t *testing.T) {
	var want []string
	for i, m := range []madeFile{
		{wafers: 2, parts: 50, sites: 3},
		{wafers: 2, parts: 50, sites: 3, order: BigEndian},
		{wafers: 2, parts: 50, sites: 3, leaveOut: true},
		{wafers: 2, parts: 50, sites: 3, textOnly: true},
	} {
		lines, p := partLines(t, m.bytes(t))
		if i == 0 {
			want = lines
			if len(lines) != 100 {
				t.Fatalf("%d parts", len(lines))
			}
		}
		if diff := cmp.Diff(want, lines); diff != "" {
			t.Errorf("%+v (want -, got +):\n%s", m, diff)
		}
		if len(p.Damages()) > 0 {
			t.Errorf("%+v: %v", m, p.Damages())
		}
		if got := show(*p.Tests()[1].Limits[0]); got != `22.5..80 spec NaN..NaN "V" scale 0` {
			t.Errorf("%+v: limits of BVCEO %s", m, got)
		}
		if n := len(p.Tests()); n != len(madeTests)+2 {
			t.Errorf("%+v: %d tests", m, n)
		}
	}
}
