package ingest

import (
	"bytes"
	"context"
	"fmt"
	"math"
	"math/rand/v2"
	"os"
	"path/filepath"
	"strconv"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/google/go-cmp/cmp/cmpopts"
	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"

	"kneepoint/config"
)

// view is everything that a lot shows, for comparison.
type view struct {
	ID, Product           string
	Wafers                []Wafer
	Tests                 []Test
	Values                [][]float64
	Censor                [][]int8
	X, Y, Site, Touchdown []int32
	HardBin, SoftBin      []int32
	Pass                  []int8
	Earlier               Earlier
	FirstPass             FirstPass
	Attributes            map[string]string
	DieAttributes         map[string][]string
	Findings              []Finding
}

func viewOf(l *Lot) view {
	v := view{ID: l.ID(), Product: l.Product(), Wafers: l.Wafers(), Tests: l.Tests(), X: l.X(), Y: l.Y(), Site: l.Site(), Touchdown: l.Touchdown(),
		HardBin: l.HardBin(), SoftBin: l.SoftBin(), Pass: l.Pass(), Earlier: *l.Earlier(), FirstPass: l.FirstPass(), Attributes: l.Attributes(),
		DieAttributes: map[string][]string{}, Findings: l.Findings()}
	for t := range l.Tests() {
		v.Values, v.Censor = append(v.Values, l.Values(t)), append(v.Censor, l.Censor(t))
	}
	for i, name := range l.DieAttributes() {
		codes, labels := l.DieAttribute(i)
		texts := make([]string, len(codes))
		for k, c := range codes {
			if c >= 0 {
				texts[k] = labels[c]
			}
		}
		v.DieAttributes[name] = texts
	}
	return v
}

func views(b *Batch) []view {
	var v []view
	for _, l := range b.Lots {
		v = append(v, viewOf(l))
	}
	return v
}

// exactly compares floats by their bits, so that -0 is not 0 and a rounding
// difference shows; every NaN is missing.
var exactly = cmp.Options{cmp.Comparer(func(a, b float64) bool {
	return math.Float64bits(a) == math.Float64bits(b) || a != a && b != b
}), cmpopts.EquateEmpty()}

// sampleLot is a lot as a tester would have it: two wafers, retests, blanks.
type sampleLot struct {
	rows  []sampleRow
	tests []string
	units []string
	lower []string
	upper []string
}

type sampleRow struct {
	key    []string // lot, wafer, x, y, site, touchdown, bin, card
	values []string
}

var sampleKeys = []string{"LOT", "WAFER", "DIE_X", "DIE_Y", "SITE", "TOUCHDOWN", "HBIN", "PROBE_CARD"}

func makeSample() sampleLot {
	r := rand.New(rand.NewPCG(9, 9))
	s := sampleLot{tests: []string{"BVCBO", "ICBO", "HFE1", "VCESAT"}, units: []string{"V", "nA", "", "mV"},
		lower: []string{"35", "", "70", ""}, upper: []string{"", "5", "250", "120"}}
	for w := 1; w <= 2; w++ {
		td := 0
		add := func(x, y int, fail bool) {
			td++
			row := sampleRow{key: []string{"A7.1", fmt.Sprintf("%02d", w), strconv.Itoa(x), strconv.Itoa(y), strconv.Itoa(1 + td%2), strconv.Itoa(td), "1", "PC" + strconv.Itoa(w)}}
			for i, level := range [][2]float64{{41.9, 0.9}, {1.2, 0.3}, {131, 8}, {93.1, 4}} {
				v := strconv.FormatFloat(level[0]+level[1]*r.NormFloat64(), 'f', 3-i%3, 64)
				if fail && i > 1 {
					v = ""
				}
				row.values = append(row.values, v)
			}
			if fail {
				row.key[6] = "5"
			}
			s.rows = append(s.rows, row)
		}
		for y := -4; y <= 4; y++ {
			for x := -4; x <= 4; x++ {
				if x*x+y*y <= 18 {
					add(x, y, (x+3*y)%11 == 0)
				}
			}
		}
		add(0, 0, false) // retests
		add(1, -3, true)
		add(1, -3, false)
	}
	return s
}

// wide writes a row a die.
func (s sampleLot) wide(sep string, comma bool) string {
	var b strings.Builder
	line := func(cells ...string) { b.WriteString(strings.Join(cells, sep) + "\n") }
	number := func(v string) string {
		if comma {
			return strings.Replace(v, ".", ",", 1)
		}
		return v
	}
	all := func(v []string) (out []string) {
		for _, x := range v {
			out = append(out, number(x))
		}
		return out
	}
	blank := func(word string) []string { k := make([]string, len(sampleKeys)); k[1] = word; return k }
	line(append(append([]string{}, sampleKeys...), s.tests...)...)
	line(append(blank("Unit"), s.units...)...)
	line(append(blank("LSL"), all(s.lower)...)...)
	line(append(blank("USL"), all(s.upper)...)...)
	for _, r := range s.rows {
		line(append(append([]string{}, r.key...), all(r.values)...)...)
	}
	return b.String()
}

// long writes a row a reading; byTest sorts them by test within a wafer.
func (s sampleLot) long(sep string, byTest bool) string {
	var b strings.Builder
	b.WriteString(strings.Join(append(append([]string{}, sampleKeys...), "TEST", "VALUE", "UNIT", "LOWER", "UPPER"), sep) + "\n")
	line := func(r sampleRow, i int) {
		b.WriteString(strings.Join(append(append([]string{}, r.key...), s.tests[i], r.values[i], s.units[i], s.lower[i], s.upper[i]), sep) + "\n")
	}
	if byTest {
		for i := range s.tests {
			for _, r := range s.rows {
				line(r, i)
			}
		}
		return b.String()
	}
	for _, r := range s.rows {
		for i := range s.tests {
			line(r, i)
		}
	}
	return b.String()
}

func gzipped(s string) string {
	var b bytes.Buffer
	w := gzip.NewWriter(&b)
	w.Write([]byte(s))
	if err := w.Close(); err != nil {
		panic(err)
	}
	return b.String()
}

func zstded(s string) string {
	w, err := zstd.NewWriter(nil)
	if err != nil {
		panic(err)
	}
	return string(w.EncodeAll([]byte(s), nil))
}

// readFile reads one text under a name.
func readNamed(t testing.TB, name, text string, opt Options) (*Batch, error) {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(text), 0o644); err != nil {
		t.Fatal(err)
	}
	return Read(context.Background(), []string{path}, opt)
}

func mustRead(t testing.TB, text string, opt Options) *Batch {
	t.Helper()
	b, err := readNamed(t, "LOT7.csv", text, opt)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// Every way to write a lot gives the same lot.
func TestLayoutsAgree(t *testing.T) {
	s := makeSample()
	product := &config.Product{Name: "P", Tests: []config.Test{{Name: "hfe1", Lower: 80, Upper: math.NaN(), Clamp: math.NaN(), Floor: math.NaN()}}}
	for _, p := range []*config.Product{nil, product} {
		want := mustRead(t, s.wide(",", false), Options{Product: p})
		if n := want.Lots[0].Len(); n != len(s.rows)-6 {
			t.Fatalf("%d dice of %d rows", n, len(s.rows))
		}
		crlf := func(x string) string { return strings.ReplaceAll(x, "\n", "\r\n") }
		for name, text := range map[string]string{
			"semicolon":              s.wide(";", false),
			"decimal comma":          s.wide(";", true),
			"tab":                    s.wide("\t", false),
			"tab, decimal comma":     s.wide("\t", true),
			"gzip":                   gzipped(s.wide(",", false)),
			"gzip in two members":    gzipped(s.wide(",", false)[:500]) + gzipped(s.wide(",", false)[500:]),
			"zstd":                   zstded(s.wide(";", true)),
			"byte-order mark":        "\xef\xbb\xbf" + s.wide(",", false),
			"CR LF":                  crlf(s.wide(",", false)),
			"CR alone":               strings.ReplaceAll(s.wide(",", false), "\n", "\r"),
			"no last line end":       strings.TrimRight(s.wide(",", false), "\n"),
			"quotes":                 quoted(s.wide(",", false), ","),
			"quotes, decimal comma":  quoted(s.wide(";", true), ";"),
			"comma in quotes":        quoted(strings.ReplaceAll(s.wide(";", true), ";", "\x01"), "\x01"),
			"comments":               "# a comment\n" + strings.Replace(s.wide(",", false), "\nA7.1,02", "\n# half way\nA7.1,02", 1),
			"blank lines":            strings.ReplaceAll(s.wide(",", false), "\nA7.1,02", "\n\nA7.1,02"),
			"blanks around":          strings.ReplaceAll(s.wide(",", false), ",", " , "),
			"separator at the end":   strings.ReplaceAll(s.wide(",", false), "\n", ",\n"),
			"old end mark":           s.wide(",", false) + "\x1a",
			"bins with a point":      strings.ReplaceAll(strings.ReplaceAll(s.wide(",", false), ",1,PC", ",1.0,PC"), ",5,PC", ",5.0,PC"),
			"units in names":         unitsInNames(s),
			"long":                   s.long(",", false),
			"long, by test":          s.long(",", true),
			"long, semicolon":        s.long(";", false),
			"long, tab, CR LF, gzip": gzipped(crlf(s.long("\t", false))),
			"long, quotes":           quoted(s.long(",", false), ","),
		} {
			if name == "comma in quotes" {
				text = strings.ReplaceAll(text, "\x01", ",")
			}
			for _, opt := range []Options{{Workers: 1}, {Workers: 3, block: 700}, {Workers: 2, careful: true, block: 1500}} {
				opt.Product = p
				got := mustRead(t, text, opt)
				if d := cmp.Diff(views(want), views(got), exactly); d != "" {
					t.Errorf("%s, %+v: (-wide +this)\n%s", name, opt, d)
				}
			}
		}
	}
}

// quoted puts every field between quotes.
func quoted(text, sep string) string {
	var b strings.Builder
	for _, line := range strings.Split(strings.TrimSuffix(text, "\n"), "\n") {
		cells := strings.Split(line, sep)
		for i, c := range cells {
			cells[i] = `"` + c + `"`
		}
		b.WriteString(strings.Join(cells, sep) + "\n")
	}
	return b.String()
}

// unitsInNames writes the units into the header instead of a row.
func unitsInNames(s sampleLot) string {
	lines := strings.Split(s.wide(",", false), "\n")
	h := strings.Split(lines[0], ",")
	for i, u := range s.units {
		if u != "" {
			h[len(sampleKeys)+i] += []string{" [" + u + "]", " (" + u + ")"}[i%2]
		}
	}
	return strings.Join(append([]string{strings.Join(h, ",")}, lines[2:]...), "\n")
}

// What is in a block must not matter: blocks of any size, any number of
// workers, fast or full reader.
func TestBlocksDoNotMatter(t *testing.T) {
	s := makeSample()
	text := strings.Replace(s.wide(",", false), "41.", "OVL", 3)
	text = strings.Replace(text, "PC2", "\"PC\n2\"", 1)
	text = strings.Replace(text, "PC2\n", "# c\n", 1)
	want := mustRead(t, text, Options{Workers: 1, careful: true})
	for _, size := range []int{64, 100, 333, 1000, 4096, 1 << 20} {
		for workers := 1; workers <= 3; workers++ {
			got := mustRead(t, text, Options{Workers: workers, block: size})
			if d := cmp.Diff(stripped(views(want)), stripped(views(got)), exactly); d != "" {
				t.Errorf("block %d, workers %d:\n%s", size, workers, d)
			}
		}
	}
}

// stripped takes the temporary folder out of the findings.
func stripped(v []view) []view {
	for i := range v {
		for k := range v[i].Findings {
			f := &v[i].Findings[k]
			if at := strings.Index(f.Text, "LOT7"); at >= 0 {
				f.Text = f.Text[at:]
			}
		}
	}
	return v
}

// Which column is the die's x, when several could be.
func TestWhichCoordinates(t *testing.T) {
	for _, c := range []struct {
		name, header, row string // row: of die 3, 4
		tests             string
	}{
		{"die-named beside positions", "WAFER,X,Y,DIE_X,DIE_Y,BV", "1,-12500,7300,3,4,25.5", "BV"},
		{"die-named beside fractions", "WAFER,X,Y,DIE_X,DIE_Y,BV", "1,-12.5,7.3,3,4,25.5", "BV"},
		{"fractions under the best name", "WAFER,X,Y,COL,ROW,BV", "1,-12.5,7.3,3,4,25.5", "BV"},
		{"a star", "WAFER,*x,*y,\"die, x\",\"die, y\",BV", "1,7,8,3,4,25.5", "BV"},
		{"tests of short names", "WAFER,X,Y,TD,W,DX,DY,COL,NO,BV", "1,3,4,1,2.5,0.5,1.5,3.25,4.5,25.5", "W DX DY COL NO BV"},
		{"German", "Los,Scheibe,Spalte,Zeile,BV", "L,1,3,4,25.5", "BV"},
		{"no second column", "WAFER,DX,DY,BV", "1,3,4,25.5", "BV"},
	} {
		l := mustRead(t, table(c.header, c.row), Options{}).Lots[0]
		if !l.HasCoordinates() || l.X()[0] != 3 || l.Y()[0] != 4 || testNames(l) != c.tests {
			t.Errorf("%s: x %v, y %v, tests %s", c.name, l.X(), l.Y(), testNames(l))
		}
	}
}
