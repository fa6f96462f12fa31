package rehearse

import (
	"context"
	"errors"
	"flag"
	"math"
	"os"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/causes"
)

var update = flag.Bool("update", false, "write the demo product's calibration anew")

func demoProduct(t testing.TB) *config.Product {
	t.Helper()
	p, err := config.ParseProduct("demo.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func long() bool { return os.Getenv("KNEEPOINT_LONG") != "" }

// TestShipped: the program comes with a calibration of the demo's product that is of
// this version; the long test makes it anew and compares. After a change to the
// catalogue or to how lots are judged:
//
//	go test ./reports/rehearse -run TestShipped -update
func TestShipped(t *testing.T) {
	p := demoProduct(t)
	var fresh *Calibration
	if *update || long() {
		w, s, err := Calibrate(context.Background(), p, Options{})
		if err != nil {
			t.Fatal(err)
		}
		fresh = NewCalibration(p, w, s)
	}
	if *update {
		data, err := fresh.Write()
		if err != nil {
			t.Fatal(err)
		}
		if err := os.WriteFile("demo-calibration.json", data, 0o644); err != nil {
			t.Fatal(err)
		}
		shipped = data
	}
	have := Shipped(p)
	if have == nil {
		t.Fatal("demo-calibration.json is not of this version and product; write it anew with -update")
	}
	if fresh == nil {
		return
	}
	// Another processor may round otherwise; what is told moves by no more than 1 %.
	near := func(name string, a, b float64) {
		if math.Abs(a-b) > 0.02*max(math.Abs(a), 0.5) {
			t.Errorf("%s: shipped %.4f, made anew %.4f; write it anew with -update", name, a, b)
		}
	}
	for i := range have.Weights.View {
		near("view", have.Weights.View[i], fresh.Weights.View[i])
	}
	near("nothing", have.Weights.Nothing, fresh.Weights.Nothing)
	near("unknown", have.Weights.Unknown, fresh.Weights.Unknown)
	near("pair", have.Weights.Pair, fresh.Weights.Pair)
}

// TestCalibrateSame: the same weights on one core and on several.
func TestCalibrateSame(t *testing.T) {
	p := demoProduct(t)
	o := Options{Lots: 8, Seed: 3, Physics: "laws"}
	var got [2]Calibration
	for i, cores := range []int{1, 4} {
		was := runtime.GOMAXPROCS(cores)
		w, s, err := Calibrate(context.Background(), p, o)
		runtime.GOMAXPROCS(was)
		if err != nil {
			t.Fatal(err)
		}
		got[i] = *NewCalibration(p, w, s)
	}
	if diff := cmp.Diff(got[0], got[1]); diff != "" {
		t.Errorf("one core (-), four (+):\n%s", diff)
	}
	if got[0].Weights == causes.UsualWeights() {
		t.Error("eight lots moved no weight")
	}
}

// TestCalibrateStops: a cancelled calibration says so and gives nothing.
func TestCalibrateStops(t *testing.T) {
	ctx, cancel := context.WithCancel(context.Background())
	seen := 0
	_, _, err := Calibrate(ctx, demoProduct(t), Options{Lots: 400, Physics: "laws", Progress: func(done, total int) {
		if seen = done; done == 2 {
			cancel()
		}
	}})
	if !errors.Is(err, context.Canceled) {
		t.Fatalf("error %v", err)
	}
	if seen > 20 {
		t.Errorf("%d lots were made after all", seen)
	}
}

// TestDeal: the mix is the same at every length, and every cause has its turn.
func TestDeal(t *testing.T) {
	lots := deal(320, 1, calibrationMix)
	kinds, singles := map[Kind]int{}, map[string]int{}
	seeds := map[uint64]bool{}
	for _, l := range lots {
		kinds[l.Kind]++
		seeds[l.Seed] = true
		if l.Kind == Single {
			singles[l.Causes[0]]++
		}
		if l.Kind == Pair && l.Causes[0] == l.Causes[1] {
			t.Errorf("lot %d has %s twice", l.Index, l.Causes[0])
		}
	}
	if want := (map[Kind]int{Healthy: 80, Single: 180, Pair: 40, Odd: 20}); !cmp.Equal(kinds, want) {
		t.Error(cmp.Diff(want, kinds))
	}
	for _, e := range synth.Catalogue() {
		if n := singles[e.ID]; n < 11 || n > 12 {
			t.Errorf("%d lots of %s", n, e.ID)
		}
	}
	if len(seeds) != len(lots) {
		t.Errorf("%d seeds of %d lots", len(seeds), len(lots))
	}
	first := map[uint64]bool{}
	for _, l := range deal(100, mixSeed(1, rehearsalStream), rehearsalMix) {
		first[l.Seed] = true
	}
	for _, l := range deal(400, mixSeed(1, calibrationStream), calibrationMix) {
		if first[l.Seed] {
			t.Error("a rehearsal has a lot of the calibration")
		}
	}
}

// TestStore: what is stored is loaded again; what is damaged, of another version or
// another product is refused with a reason.
func TestStore(t *testing.T) {
	dir, p := filepath.Join(t.TempDir(), "new", "folder"), demoProduct(t)
	if c, err := Load(dir, p); c != nil || err != nil {
		t.Fatalf("an empty cache gives %v, %v", c, err)
	}
	w := causes.UsualWeights()
	w.Nothing = 0.1 + 0.2
	c := NewCalibration(p, w, Summary{Lots: 7, OutOfReach: map[string]int{"epi-doping": 2}})
	if err := Store(dir, p, c); err != nil {
		t.Fatal(err)
	}
	got, err := Load(dir, p)
	if err != nil {
		t.Fatal(err)
	}
	if diff := cmp.Diff(c, got); diff != "" {
		t.Error(diff)
	}
	text, err := os.ReadFile(Stored(dir, p))
	if err != nil {
		t.Fatal(err)
	}
	for what, damaged := range map[string]string{
		"is no calibration":       string(text[:len(text)/2]),
		"is no calibration: json": strings.Replace(string(text), "weights", "wights", 1),
		"another version":         strings.Replace(string(text), Version(), "0123456789abcdef", 1),
		"another product":         strings.Replace(string(text), p.SHA256, strings.Repeat("0", 64), 1),
		"has a weight of":         strings.Replace(string(text), "0.55,", "-0.55,", 1),
	} {
		if err := os.WriteFile(Stored(dir, p), []byte(damaged), 0o644); err != nil {
			t.Fatal(err)
		}
		if c, err := Load(dir, p); c != nil || err == nil || !strings.Contains(err.Error(), what) {
			t.Errorf("%s: got %v, %v", what, c, err)
		}
	}
	if files, err := os.ReadDir(dir); err != nil || len(files) != 1 {
		t.Errorf("left behind: %v, %v", files, err)
	}
}

// BenchmarkCalibrate is a whole calibration of the demo's product.
func BenchmarkCalibrate(b *testing.B) {
	p := demoProduct(b)
	for b.Loop() {
		if _, _, err := Calibrate(context.Background(), p, Options{}); err != nil {
			b.Fatal(err)
		}
	}
}
