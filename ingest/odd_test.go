package ingest

import (
	"context"
	"errors"
	"io/fs"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"

	"kneepoint/config"
)

// odd is one kind of bad or odd input. Either the reading fails with one line
// that matches fails, or it gives the findings of codes, and dice.
type odd struct {
	name    string
	file    string // name of the file, lot.csv if empty
	text    string
	product *config.Product
	opt     Options
	fails   string // a regular expression
	codes   string // "code:dice code:dice ..." that must be among the findings
	dice    int    // 0: not looked at
}

// table joins lines.
func table(lines ...string) string { return strings.Join(lines, "\n") + "\n" }

// nine is a wafer of nine dice, each line end with the given text added.
func nine(header string, row func(i int) string) string {
	b := []string{header}
	for i := range 9 {
		b = append(b, row(i))
	}
	return table(b...)
}

const plainHeader = "LOT,WAFER,X,Y,HBIN,BVCEO,ICBO"

func plainRow(i int) string {
	return strings.Join([]string{"L1", "3", string(rune('0' + i%3)), string(rune('0' + i/3)), "1", "24." + string(rune('1'+i)) + "5", "0." + string(rune('1'+i))}, ",")
}

func plain() string { return nine(plainHeader, plainRow) }

func swap(old, new string) string {
	s := strings.Replace(plain(), old, new, 1)
	if s == plain() {
		panic("nothing to swap: " + old)
	}
	return s
}

func aProduct(tests ...config.Test) *config.Product {
	for i := range tests {
		t := &tests[i]
		for _, v := range []*float64{&t.Lower, &t.Upper, &t.Clamp, &t.Floor} {
			if *v == 0 {
				*v = math.NaN()
			}
		}
	}
	return &config.Product{Name: "P", Tests: tests}
}

func unit(text string) config.Unit {
	u, err := config.ParseUnit(text)
	if err != nil {
		panic(err)
	}
	return u
}

var odds = []odd{
	// What cannot be read.
	{name: "empty", text: "", fails: `lot\.csv: is empty; .+`},
	{name: "blank", text: "\n \n\n", fails: `lot\.csv: is empty but for`},
	{name: "only comments", text: "# lot: A\n# wafer: 3\n", fails: `lot\.csv: is empty but for`},
	{name: "header only", text: plainHeader + "\n", fails: `lot\.csv:1: there is a header and no data row`},
	{name: "header and limits only", text: table(plainHeader, "unit,,,,,V,nA", "lower,,,,,20,"), fails: `lot\.csv:1: there is a header and no data row`},
	{name: "no header", text: table("1,2,3,4.5", "1,2,4,4.6"), fails: `lot\.csv:1: no header found: .*numbers only; put a row with the names`},
	{name: "binary", text: "\x7fELF\x02\x01\x00\x00\x00\x01", fails: `lot\.csv: is binary data.*zero byte stands at byte 6`},
	{name: "binary without zeros", text: strings.Repeat("\x01\x02\x03\x8f\x90,", 20), fails: `lot\.csv: is binary data`},
	{name: "UTF-16, little-endian", text: "\xff\xfeL\x00O\x00T\x00,\x00W\x00\n\x00", fails: `lot\.csv: is UTF-16 text starting "LOT,W.*; save it as UTF-8`},
	{name: "UTF-16, big-endian", text: "\xfe\xff\x00L\x00O\x00T\x00,\x00W\x00\n", fails: `lot\.csv: is UTF-16 text`},
	{name: "UTF-16 without mark", text: "L\x00O\x00T\x00,\x00W\x00A\x00F\x00E\x00R\x00\n\x00", fails: `lot\.csv: is UTF-16 text`},
	{name: "zip", text: "PK\x03\x04....", fails: `lot\.csv: the zip archive is damaged or cut short`},
	{name: "Parquet", text: "PAR1....", fails: `lot\.csv: the Parquet file is damaged or cut short`},
	{name: "prose", text: "Dear colleague,\nplease find the lot below.\n", fails: `lot\.csv:\d+: .+; .+`},
	{name: "one column", text: table("WAFER", "1", "2"), fails: `lot\.csv:1: no table found: the rows have no comma, semicolon or tab`},
	{name: "no wafer column", text: strings.Replace(plain(), "WAFER", "PLATE", 1), fails: `lot\.csv:1: no wafer column found: looked for wafer, waferid.*the header holds LOT, PLATE, X, Y.*; rename the column, or name it under columns\.wafer`},
	{name: "no test column", text: table("LOT,WAFER,X,Y,CARD", "L1,1,0,0,a", "L1,1,0,1,b"), fails: `lot\.csv:1: no column of numbers found that could be a test; the header holds LOT, WAFER`},
	{name: "same name twice", text: table("WAFER,X,Y,BVCEO,bvceo", "1,0,0,25,26"), fails: `lot\.csv:1: column "bvceo": the header has this name twice, in columns 4 and 5; rename`},
	{name: "column of the product not there", text: plain(), product: &config.Product{Columns: map[string]string{"wafer": "SLICE"}}, fails: `lot\.csv:1: column "SLICE": the product file names this column for wafer.*the header holds LOT, WAFER.*; correct columns\.wafer`},
	{name: "lot not there", text: plain(), opt: Options{Lot: "L9"}, fails: `lot\.csv: there is no lot "L9"; the lots here are L1; choose one`},
	{name: "line too long", text: table("WAFER,X,Y,BVCEO", "1,0,0,25", "1,0,1,"+strings.Repeat("9", maxLine+10)), fails: `lot\.csv:3: the line is longer than 16 MB`},
	{name: "gzip that is none", text: "\x1f\x8bnot gzip", fails: `lot\.csv: the gzip data are damaged or cut short at about byte \d+ of 10`},
	{name: "gzip cut in its header", text: gzipped(plain())[:7], fails: `lot\.csv: the gzip data are damaged or cut short`},
	{name: "zstd that is none", text: "\x28\xb5\x2f\xfdjunkjunkjunk", fails: `lot\.csv: the zstd data are damaged or cut short at about byte`},
	{name: "wafer never filled", text: table("WAFER,X,Y,BVCEO", ",0,0,25", ",0,1,26"), fails: `lot\.csv: no row could be used: 2 no-wafer`},
	{name: "policy unknown", text: plain(), opt: Options{Retest: "median"}, fails: `retest policy "median": there is no such policy; use last, first or best`},

	// What is read with a finding.
	{name: "plain", text: plain(), codes: "", dice: 9},
	{name: "cut in the middle of a line", text: strings.TrimSuffix(plain(), "95,0.9\n"), codes: "cut-short:1", dice: 8},
	{name: "cut in the last cell", text: strings.TrimSuffix(strings.ReplaceAll(plain(), "0.", "0.12"), "9\n"), codes: "cut-short:1", dice: 8},
	{name: "last line end missing", text: strings.TrimSuffix(plain(), "\n"), dice: 9},
	{name: "short row", text: swap(",24.25,0.2", ""), codes: "short-row:1 missing:1", dice: 9},
	{name: "long row", text: swap(",24.25,0.2", ",24.25,0.2,7"), codes: "long-row:1", dice: 8},
	{name: "decimal comma under a comma", text: swap("24.25", "24,25"), codes: "long-row:1", dice: 8},
	{name: "blank row", text: swap("L1,3,1,0", ",,,,,,\nL1,3,1,0"), codes: "blank-row:1", dice: 9},
	{name: "header again", text: plain() + plain()[:len(plainHeader)+1] + "L1,4,0,0,1,24,0.1\n", codes: "repeated-header:1", dice: 10},
	{name: "row without wafer", text: swap("L1,3,1,0", "L1,,1,0"), codes: "no-wafer:1", dice: 8},
	{name: "zero bytes within", text: strings.Repeat("# comment\n", 500) + swap("L1,3,1,0", "L\x00,3,1,0"), codes: "binary-row:1", dice: 8},
	{name: "text in a test", text: swap("24.25", "24.2S"), codes: "unreadable-value:1 missing:1", dice: 9},
	{name: "text in a coordinate", text: swap("L1,3,1,0", "L1,3,q,0"), codes: "unreadable-value:1 die-without-coordinates:1", dice: 9},
	{name: "fraction in a bin", text: swap("L1,3,1,0,1", "L1,3,1,0,1.5"), codes: "unreadable-value:1", dice: 9},
	{name: "infinite", text: swap("24.25", "inf"), codes: "over-range:1", dice: 9},
	{name: "1e999", text: swap("24.25", "-1e999"), codes: "over-range:1", dice: 9},
	{name: "NaN", text: swap("24.25", "NaN"), codes: "missing-word:1 missing:1", dice: 9},
	{name: "several words", text: strings.NewReplacer("24.15", "NA", "24.25", "--", "24.35", "null", "0.5", "N/A").Replace(plain()), codes: "missing-word:3 missing-word:1", dice: 9},
	{name: "bins only", text: table("lot,wafer,x,y,bin", "L,1,0,0,1", "L,1,1,0,5"), codes: "no-tests:0", dice: 2},
	{name: "flags only", text: table("wafer,x,y,pass", "1,0,0,P", "1,1,0,F", "1,2,0,P"), codes: "no-tests:0", dice: 3},
	{name: "limits crossed", text: table("WAFER,X,Y,BV", "LSL,,,30", "USL,,,20", "1,0,0,25.5", "1,1,0,26"), codes: "limits-crossed:0", dice: 2},
	{name: "limits crossed, product lower", text: table("WAFER,X,Y,BV", "USL,,,20", "1,0,0,25.5", "1,1,0,26"), product: aProduct(config.Test{Name: "BV", Lower: 24}), codes: "limits-crossed:0", dice: 2},
	{name: "units of two dimensions", text: table("WAFER,X,Y,TEST,VALUE,UNIT", "1,0,0,A,5,nA", "1,1,0,A,25,V", "1,2,0,A,26,mV", "1,3,0,A,27,xyz"), codes: "unit-conflict:2 mixed-units:0 untested:2", dice: 2},
	{name: "footer", text: plain() + "Mean,,,,,24.5,0.5\n,Total,,,9,,\n", codes: "summary-row:1 no-wafer:1", dice: 9},
	{name: "a wafer named Max with coordinates", text: table("WAFER,X,Y,BV", "Max,0,0,1.5", "Max,1,0,2.5"), dice: 2},
	{name: "wafer written in several ways", text: table("LOT,WAFER,X,Y,BV", "A,1,0,0,1.5", "A,01,1,0,2.5", "A,01,2,0,3.5", "A,1.0,3,0,3.5", "A,W01,4,0,3.5", "A,w1,5,0,3.5", "A,1a,6,0,3.5", "A,10,7,0,2.5"), codes: "wafer-ids-merged:0", dice: 8},
	{name: "dice not tested", text: table("WAFER,X,Y,HBIN,BV", "1,0,0,1,25.5", "1,1,0,,", "1,2,0,5,", "1,3,0,,26.5", "1,4,0,,NA", "1,4,0,,", "2,0,0,,"), codes: "untested:3", dice: 3},
	{name: "dice not tested, long", text: table("WAFER,X,Y,TEST,VALUE", "1,0,0,A,1.5", "1,0,0,B,2.5", "1,1,0,A,", "1,1,0,B,"), codes: "untested:1", dice: 1},
	{name: "product of other tests", text: plain(), product: aProduct(config.Test{Name: "VBE"}), fails: `lot\.csv: none of the product file's tests is in the data; the product file has VBE, the data have BVCEO, ICBO; use the product`},
	{name: "overload", text: swap("24.25", "OVL"), codes: "over-range:1", dice: 9},
	{name: "sentinel", text: strings.NewReplacer("24.15", "-9999", "24.25", "-9999").Replace(plain()), codes: "sentinel:2 missing:2", dice: 9},
	{name: "huge sentinel, once", text: swap("24.25", "9.91E+37"), codes: "sentinel:1 missing:1", dice: 9},
	{name: "sentinel in nA", text: strings.NewReplacer("ICBO", "ICBO [nA]", "0.1\n", "9999\n", "0.2\n", "9999\n").Replace(plain()), codes: "sentinel:2", dice: 9},
	{name: "999 once is a value", text: swap("24.25", "999"), dice: 9},
	{name: "retest", text: plain() + "L1,3,1,1,1,24.6,0.5\n", codes: "retest:1", dice: 9},
	{name: "row twice", text: plain() + plainRow(4) + "\n", codes: "duplicate-row:1", dice: 9},
	{name: "retest without any value", text: plain() + "L1,3,1,1,,,\n", codes: "retest:1 retest-empty:1", dice: 9},
	{name: "policy best", text: plain() + "L1,3,1,1,5,20,0.5\n", opt: Options{Retest: RetestBest}, codes: "retest:1 retest-best:1", dice: 9},
	{name: "one coordinate only", text: strings.Replace(plain(), ",Y,", ",OTHER,", 1), codes: "no-coordinates:9"},
	{name: "no coordinates", text: table("WAFER,SITE,BVCEO", "1,1,25", "1,2,26", "2,1,27"), codes: "no-coordinates:3", dice: 3},
	{name: "die off the wafer", text: swap("L1,3,1,0", "L1,3,900,0"), product: &config.Product{Wafer: config.Wafer{DiameterMM: 10, DieWidthMM: 2, DieHeightMM: 2}}, codes: "off-wafer:1", dice: 9},
	{name: "unit conflict", text: strings.Replace(plain(), "ICBO", "ICBO [V]", 1), product: aProduct(config.Test{Name: "ICBO", Unit: unit("nA")}), codes: "unit-conflict:0", dice: 9},
	{name: "other prefix", text: strings.Replace(plain(), "ICBO", "ICBO [pA]", 1), product: aProduct(config.Test{Name: "ICBO", Unit: unit("nA")}), codes: "unit-prefix:0", dice: 9},
	{name: "unit unknown", text: swap("L1,3,0,0", "unit,,,,,V,furlong\nL1,3,0,0"), codes: "unit-not-understood:0", dice: 9},
	{name: "limits differ", text: swap("L1,3,0,0", "lower,,,,,20,\nL1,3,0,0"), product: aProduct(config.Test{Name: "bvceo", Lower: 22}), codes: "limits-differ:0", dice: 9},
	{name: "test of the product absent", text: plain(), product: aProduct(config.Test{Name: "BVCEO"}, config.Test{Name: "BVEBO"}), codes: "test-not-in-data:0", dice: 9},
	{name: "limits among rows of a long table", text: table("WAFER,X,Y,TEST,VALUE,LSL", "1,0,0,A,1,0", "1,0,1,A,2,0", "1,0,2,A,2,1"), codes: "limits-mixed:0", dice: 3},
	{name: "units among rows of a long table", text: table("WAFER,X,Y,TEST,VALUE,UNIT", "1,0,0,A,1,nA", "1,0,1,A,2000,pA"), codes: "mixed-units:0", dice: 2},
	{name: "long row without test name", text: table("WAFER,X,Y,TEST,VALUE", "1,0,0,A,1", "1,0,1,,2"), codes: "no-test-name:0", dice: 1},
	{name: "long table without die identity", text: table("WAFER,TEST,VALUE", "1,A,1", "1,A,2", "1,B,3", "1,B,4"), codes: "no-die-identity:0", dice: 2},
	{name: "quote not closed", text: swap("L1,3,1,0", "\"L1,3,1,0"), codes: "unclosed-quote:1", dice: 9},
	{name: "row of limits that says nothing", text: swap("L1,3,0,0", ",,,,,20,5\nL1,3,0,0"), codes: "row-not-understood:0", dice: 9},
	{name: "coordinates that are text", text: strings.NewReplacer(",0,", ",A,", ",1,", ",B,", ",2,", ",C,").Replace(plain()), codes: "column-not-understood:0 no-coordinates:9"},
	{name: "positions for coordinates", text: strings.NewReplacer(",0,", ",0.5,", ",1,", ",1.5,", ",2,", ",2.5,").Replace(plain()), codes: "column-not-understood:0 no-coordinates:9"},
	{name: "lot not filled down", text: strings.Replace(strings.ReplaceAll(plain(), "L1,3", ",3"), ",3,0,0", "L1,3,0,0", 1), codes: "no-lot:8", dice: 9},
	{name: "above the clamp", text: plain(), product: aProduct(config.Test{Name: "BVCEO", Clamp: 24.5}), codes: "above-clamp:3", dice: 9},
	{name: "at the clamp", text: strings.NewReplacer("24.85", "24.95", "24.75", "24.95").Replace(plain()), product: aProduct(config.Test{Name: "BVCEO", Clamp: 24.95}), codes: "clamped:3", dice: 9},
	{name: "at the floor", text: plain(), product: aProduct(config.Test{Name: "ICBO", Floor: 0.25}), codes: "at-floor:2", dice: 9},
	{name: "one value", text: oneValue(), codes: "one-value:30", dice: 30},
	{name: "gzip cut", file: "lot.csv.gz", text: gzipped(manyRows(5000))[:9000], codes: "broken-off:0 cut-short:1"},
	{name: "zstd cut", file: "lot.csv.zst", text: cutZstd(), codes: "broken-off:0"},
	{name: "Latin letters", text: strings.Replace(plain(), "ICBO", "ICBO [\xb5A]", 1), dice: 9},
}

func oneValue() string {
	b := []string{"WAFER,X,Y,BVCBO [V]"}
	for i := range 30 {
		b = append(b, strings.Join([]string{"1", itoa(i % 6), itoa(i / 6), "80"}, ","))
	}
	return table(b...)
}

func itoa(i int) string { return string(rune('0' + i)) }

func manyRows(n int) string {
	var b strings.Builder
	b.WriteString("WAFER,X,Y,BVCEO\n")
	for i := range n {
		x := uint32(i) * 2654435761
		b.WriteString("1," + digitsOf(i%100) + "," + digitsOf(i/100) + ",24." + digitsOf(int(x%10000)) + "\n")
	}
	return b.String()
}

func digitsOf(i int) string {
	if i < 10 {
		return itoa(i)
	}
	return digitsOf(i/10) + itoa(i%10)
}

func cutZstd() string { s := zstded(manyRows(60_000)); return s[:len(s)*2/3] }

func TestOddInput(t *testing.T) {
	if len(odds) < 60 {
		t.Fatalf("only %d kinds", len(odds))
	}
	for _, o := range odds {
		t.Run(o.name, func(t *testing.T) {
			if o.file == "" {
				o.file = "lot.csv"
			}
			path := filepath.Join(t.TempDir(), o.file)
			if err := os.WriteFile(path, []byte(o.text), 0o644); err != nil {
				t.Fatal(err)
			}
			o.opt.Product = o.product
			b, err := Read(context.Background(), []string{path}, o.opt)
			o.check(t, b, err)
		})
	}
}

func (o odd) check(t *testing.T, b *Batch, err error) {
	t.Helper()
	if o.fails != "" {
		var e *Error
		if !errors.As(err, &e) {
			t.Fatalf("error %v, want an *Error like %q", err, o.fails)
		}
		if m := e.Error(); !regexp.MustCompile(o.fails).MatchString(m) || strings.ContainsAny(m, "\n\r") {
			t.Errorf("error %q, want one line like %q", m, o.fails)
		}
		return
	}
	if err != nil {
		t.Fatalf("error %v, want a lot", err)
	}
	n := 0
	have := map[string]bool{}
	for _, l := range b.Lots {
		n += l.Len()
		for _, f := range l.Findings() {
			have[f.Code+":"+digitsOf(f.Dice)] = true
			if f.Text == "" || f.Severity == "" || strings.ContainsAny(f.Text, "\n\r") || f.Severity != Info && f.Remedy == "" && f.Code != "die-without-coordinates" && f.Code != "missing" {
				t.Errorf("finding says too little: %+v", f)
			}
		}
	}
	for _, c := range strings.Fields(o.codes) {
		if !have[c] {
			t.Errorf("no finding %q in %v", c, b.Lots[0].Findings())
		}
	}
	if o.codes == "" && len(have) > 0 {
		t.Errorf("findings %v, want none", b.Lots[0].Findings())
	}
	if o.dice != 0 && n != o.dice {
		t.Errorf("%d dice, want %d", n, o.dice)
	}
	if b.Tally.Dice != n {
		t.Errorf("tally %+v with %d dice", b.Tally, n)
	}
}

func TestFilesThatCannotBeOpened(t *testing.T) {
	dir := t.TempDir()
	for _, c := range []struct{ path, want string }{
		{filepath.Join(dir, "none.csv"), `none\.csv: there is no such file; .+`},
		{dir, `the folder is empty; name a folder with data files`},
	} {
		_, err := Read(context.Background(), []string{c.path}, Options{})
		if err == nil || !regexp.MustCompile(c.want).MatchString(err.Error()) {
			t.Errorf("error %v, want %q", err, c.want)
		}
	}
	if _, err := Read(context.Background(), []string{filepath.Join(dir, "none.csv")}, Options{}); !errors.Is(err, fs.ErrNotExist) {
		t.Errorf("error %v does not say that the file is not there", err)
	}
	if _, err := Read(context.Background(), nil, Options{}); err == nil {
		t.Error("no error for no file")
	}
	if os.Geteuid() != 0 {
		path := filepath.Join(dir, "locked.csv")
		os.WriteFile(path, []byte(plain()), 0)
		if _, err := Read(context.Background(), []string{path}, Options{}); !errors.Is(err, fs.ErrPermission) {
			t.Errorf("error %v for a file without read permission", err)
		}
	}
}

func TestReadStopsWhenCancelled(t *testing.T) {
	path := filepath.Join(t.TempDir(), "lot.csv")
	os.WriteFile(path, []byte(manyRows(50_000)), 0o644)
	ctx, cancel := context.WithCancel(context.Background())
	_, err := Read(ctx, []string{path}, Options{block: 4096, Progress: func(done, total int64) { cancel() }})
	if !errors.Is(err, context.Canceled) {
		t.Errorf("error %v after cancelling", err)
	}
}

func TestProgressEndsAtTotal(t *testing.T) {
	dir := t.TempDir()
	a, b := filepath.Join(dir, "a.csv"), filepath.Join(dir, "b.csv.gz")
	os.WriteFile(a, []byte(manyRows(3000)), 0o644)
	os.WriteFile(b, []byte(gzipped(manyRows(3000))), 0o644)
	last, total := int64(0), int64(0)
	_, err := Read(context.Background(), []string{a, b}, Options{Progress: func(d, n int64) {
		if d < last {
			t.Errorf("progress went back from %d to %d", last, d)
		}
		last, total = d, n
	}})
	if err != nil || last != total || total == 0 {
		t.Errorf("ended at %d of %d, error %v", last, total, err)
	}
}
