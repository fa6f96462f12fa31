package page

import (
	"math"
	"strings"
	"testing"

	"kneepoint/reports"
)

// plain shows no-break spaces as spaces.
func plain(s string) string { return strings.ReplaceAll(s, space, " ") }

func TestPercent(t *testing.T) {
	for _, c := range []struct {
		p    reports.Number
		want string
	}{
		{0.873, "87.3 %"}, {0, "0 %"}, {1, "100 %"}, {0.9997, "99.97 %"}, {0.99997, "99.997 %"}, {0.9963, "99.6 %"}, {0.00065, "0.065 %"}, {0.5, "50.0 %"}, {0.0123, "1.2 %"},
		{0.00456, "0.46 %"}, {0.00003, "0.003 %"}, {1e-9, "<0.0001 %"}, {reports.NaN, "n/a"}, {reports.Number(math.Inf(1)), "n/a"},
	} {
		if got := plain(percent(c.p)); got != c.want {
			t.Errorf("percent(%v) = %q, want %q", float64(c.p), got, c.want)
		}
	}
}

func TestPercentRange(t *testing.T) {
	for _, c := range []struct {
		i    reports.Interval
		want string
	}{
		{reports.Interval{Estimate: 0.873, Lower: 0.8412, Upper: 0.9021}, "84.1 to 90.2 %"},
		{reports.Interval{Estimate: 0.9997, Lower: 0.9991, Upper: 1}, "99.91 to 100.00 %"},
		{reports.Interval{Estimate: reports.NaN, Lower: 0.1, Upper: 0.2}, "10.0 to 20.0 %"},
		{reports.Interval{Estimate: 0.5, Lower: reports.NaN, Upper: 0.6}, "n/a"},
	} {
		if got := plain(percentRange(c.i)); got != c.want {
			t.Errorf("percentRange(%v) = %q, want %q", c.i, got, c.want)
		}
	}
}

func TestValue(t *testing.T) {
	for _, c := range []struct {
		v    float64
		want string
	}{
		{24.6, "24.60"}, {24.6349, "24.63"}, {0, "0"}, {-3.14159, "-3.142"}, {1234.5, "1234"}, {123456, "123456"}, {1234567, "1.235e6"}, {9.9996, "10.00"}, {999999.9, "1e6"},
		{0.00012345, "0.0001234"}, {0.000012345, "1.234e-5"}, {2e-9, "2e-9"}, {math.NaN(), "n/a"},
	} {
		if got := value(reports.Number(c.v)); got != c.want {
			t.Errorf("value(%v) = %q, want %q", c.v, got, c.want)
		}
	}
}

func TestExact(t *testing.T) {
	for _, c := range []struct {
		v    reports.Number
		want string
	}{{22.5, "22.5"}, {250, "250"}, {0.12, "0.12"}, {5e-9, "5e-9"}, {100, "100"}, {2000000, "2e6"}, {0.1 + 0.2, "0.3"}, {reports.NaN, "n/a"}} {
		if got := exact(c.v); got != c.want {
			t.Errorf("exact(%v) = %q, want %q", float64(c.v), got, c.want)
		}
	}
}

func TestPValue(t *testing.T) {
	for _, c := range []struct {
		p    reports.Number
		want string
	}{{0.2345, "0.23"}, {0.0123, "0.012"}, {2.6e-9, "3e-9"}, {9.6e-4, "0.001"}, {0, "<1e-300"}, {1, "1"}, {reports.NaN, "n/a"}} {
		if got := pValue(c.p); got != c.want {
			t.Errorf("pValue(%v) = %q, want %q", float64(c.p), got, c.want)
		}
	}
}

func TestOtherNumbers(t *testing.T) {
	for _, c := range []struct{ got, want string }{
		{count(9671), "9671"}, {count(34125), "34,125"}, {count(2200000), "2,200,000"},
		{plural(1, "die", "dice"), "1 die"}, {plural(0, "die", "dice"), "0 dice"},
		{points(-0.0567), "5.7 points"}, {points(0.004), "0.40 points"},
		{ratio(1.333), "1.33"}, {ratio(reports.NaN), "n/a"}, {score(-0.04), "0.0"}, {score(23.44), "23.4"},
		{chance(0.863), "86 %"}, {chance(0.999), "above 99 %"}, {chance(0.001), "below 1 %"}, {chance(reports.NaN), "n/a"},
		{signedPercent(-0.1), "-10.0 %"}, {signedPercent(0), "0 %"}, {signedPercent(0.02), "+2.0 %"},
		{size(1822), "1822 bytes"}, {size(2917332), "2917 kB"}, {size(195000000), "195 MB"},
		{list([]string{"a"}), "a"}, {list([]string{"a", "b", "c"}), "a, b and c"},
		{sentence("four wafers are low"), "Four wafers are low."}, {sentence("hFE is high!"), "hFE is high!"}, {sentence("03 is low"), "03 is low."}, {sentence(" "), ""},
		{withUnit("3", "nA"), "3 nA"}, {withUnit("n/a", "nA"), "n/a"}, {orWhy("n/a", "too few"), "n/a: too few"}, {orWhy("3", "x"), "3"},
	} {
		if plain(c.got) != c.want {
			t.Errorf("got %q, want %q", plain(c.got), c.want)
		}
	}
}

func TestTicks(t *testing.T) {
	for _, c := range []struct {
		s    span
		want []float64
	}{
		{span{Low: 0, High: 10}, []float64{0, 2, 4, 6, 8, 10}},
		{span{Low: 19.3, High: 26.8}, []float64{20, 22, 24, 26}},
		{span{Low: 0.3, High: 70, Log: true}, []float64{1, 3, 10, 30}[:]},
		{span{Low: 1e-3, High: 1e9, Log: true}, []float64{1e-2, 1, 100, 1e4, 1e6, 1e8}},
		{span{Low: 2, High: 4, Log: true}, []float64{2, 2.5, 3, 3.5, 4}},
		{span{Low: 5, High: 5}, nil},
		{span{Low: 1, High: math.Inf(1), Log: true}, nil},
	} {
		got := c.s.ticks(6)
		if c.s.Log && c.s.Low == 0.3 {
			c.want = append([]float64{0.3}, c.want...)
		}
		if len(got) != len(c.want) {
			t.Errorf("ticks of %+v: %v, want %v", c.s, got, c.want)
			continue
		}
		for i := range got {
			if math.Abs(got[i]-c.want[i]) > 1e-9*math.Abs(c.want[i]) {
				t.Errorf("ticks of %+v: %v, want %v", c.s, got, c.want)
				break
			}
		}
	}
}

func TestSpanTakesNearLimitsOnly(t *testing.T) {
	s := span{Low: 20, High: 30}
	if !s.include(15) || s.Low != 15 {
		t.Errorf("a limit half a length below was left out: %+v", s)
	}
	if s.include(100) || s.High != 30 {
		t.Errorf("a limit far above was taken: %+v", s)
	}
	l := span{Low: 0.1, High: 10, Log: true}
	if !l.include(100) || l.include(0) || l.include(1e6) {
		t.Errorf("a log span took the wrong limits: %+v", l)
	}
	if at := (span{Low: 1, High: 100, Log: true}).place(10); math.Abs(at-0.5) > 1e-12 {
		t.Errorf("10 lies at %v of 1 to 100 on a log axis, want 0.5", at)
	}
}
