package wafermap

import (
	"image/color"
	"math"
	"testing"
)

// Colour arithmetic for the checks: sRGB (IEC 61966-2-1) to linear light, CIE 1976
// L*a*b* under D65.

func linear(v uint8) float64 {
	c := float64(v) / 255
	if c <= 0.04045 {
		return c / 12.92
	}
	return math.Pow((c+0.055)/1.055, 2.4)
}

func linearRGB(c color.RGBA) [3]float64 { return [3]float64{linear(c.R), linear(c.G), linear(c.B)} }

func times(m [3][3]float64, v [3]float64) (out [3]float64) {
	for i := range m {
		for j := range v {
			out[i] += m[i][j] * v[j]
		}
	}
	return out
}

func lab(rgb [3]float64) [3]float64 {
	xyz := times([3][3]float64{{0.4124564, 0.3575761, 0.1804375}, {0.2126729, 0.7151522, 0.0721750}, {0.0193339, 0.1191920, 0.9503041}}, rgb)
	f := func(t float64) float64 {
		if t > 216.0/24389 {
			return math.Cbrt(t)
		}
		return (24389.0/27*t + 16) / 116
	}
	x, y, z := f(xyz[0]/0.95047), f(xyz[1]), f(xyz[2]/1.08883)
	return [3]float64{116*y - 16, 500 * (x - y), 200 * (y - z)}
}

func apart(a, b [3]float64) float64 {
	return math.Sqrt(sq(a[0]-b[0]) + sq(a[1]-b[1]) + sq(a[2]-b[2]))
}

// eyes are how linear RGB looks to eyes without one kind of cone: Machado, Oliveira
// and Fernandes 2009, severity 1, matrices from memory; "grey" is what a printer
// leaves.
var eyes = map[string][3][3]float64{
	"all cones":    {{1, 0, 0}, {0, 1, 0}, {0, 0, 1}},
	"protanopia":   {{0.152286, 1.052583, -0.204868}, {0.114503, 0.786281, 0.099216}, {-0.003882, -0.048116, 1.051998}},
	"deuteranopia": {{0.367322, 0.860646, -0.227968}, {0.280085, 0.672501, 0.047413}, {-0.011820, 0.042940, 0.968881}},
	"tritanopia":   {{1.255528, -0.076749, -0.178779}, {-0.078411, 0.930809, 0.147602}, {0.004733, 0.691367, 0.303900}},
	"grey":         {{0.2126, 0.7152, 0.0722}, {0.2126, 0.7152, 0.0722}, {0.2126, 0.7152, 0.0722}},
}

func seen(eye string, c color.RGBA) [3]float64 {
	v := times(eyes[eye], linearRGB(c))
	for i := range v {
		v[i] = max(0, min(1, v[i]))
	}
	return lab(v)
}

// White must stay white to every eye, or a matrix was remembered wrongly.
func TestEyesSeeWhite(t *testing.T) {
	for eye := range eyes {
		if d := apart(seen(eye, color.RGBA{255, 255, 255, 255}), [3]float64{100, 0, 0}); d > 0.1 {
			t.Errorf("%s: white is off by %.2f", eye, d)
		}
	}
}

// Two states must differ by 10 CIELAB units to every eye and in grey (1 is about
// the least that is seen side by side), pass and fail by 30.
func TestPaletteKeepsStatesApart(t *testing.T) {
	for eye := range eyes {
		for a := 1; a < len(DefaultPalette); a++ {
			for b := 1; b < a; b++ {
				d := apart(seen(eye, DefaultPalette[a]), seen(eye, DefaultPalette[b]))
				least := 10.0
				if b == int(StatePass) && (a == int(StateFail) || a == int(StateLead)) {
					least = 30
				}
				if d < least {
					t.Errorf("%s: states %d and %d differ by %.1f", eye, a, b, d)
				}
			}
		}
	}
	if c := contrast(DefaultPalette[StatePass], DefaultPalette[StateFail]); c < 3 { // WCAG 2.1, 1.4.11: graphics 3:1
		t.Errorf("pass against fail: contrast %.2f", c)
	}
	if c := contrast(DefaultPalette[StateFail], DefaultPalette[StateLead]); c < 2 {
		t.Errorf("fail against leading fail: contrast %.2f", c)
	}
	l := func(s uint8) float64 { return seen("grey", DefaultPalette[s])[0] }
	if !(l(StatePass) > l(StateMarginal) && l(StateMarginal) > l(StateFail) && l(StateFail) > l(StateLead)) {
		t.Error("lightness does not fall from pass over marginal and fail to the leading fail")
	}
}

func contrast(a, b color.RGBA) float64 {
	y := func(c color.RGBA) float64 {
		v := linearRGB(c)
		return 0.2126*v[0] + 0.7152*v[1] + 0.0722*v[2]
	}
	hi, lo := max(y(a), y(b)), min(y(a), y(b))
	return (hi + 0.05) / (lo + 0.05)
}

// The ramp of fail rates falls in lightness in even steps to every eye, and is the
// one its comment describes.
func TestRateRampIsEven(t *testing.T) {
	ramp := ratePalette[2:]
	for eye := range eyes {
		previous := seen(eye, ratePalette[1])[0]
		for i, c := range ramp {
			l := seen(eye, c)[0]
			if fall := previous - l; fall < 4 || fall > 11 {
				t.Errorf("%s: step %d falls by %.1f in lightness", eye, i, fall)
			}
			previous = l
		}
	}
	for i, c := range ramp {
		s := float64(i) / float64(len(ramp)-1)
		chroma, hue := 10+34*math.Sin(0.9*math.Pi*s+0.2), (245+70*s)*math.Pi/180
		want := [3]float64{86 - 70*s, chroma * math.Cos(hue), chroma * math.Sin(hue)}
		if d := apart(lab(linearRGB(c)), want); d > 0.6 {
			t.Errorf("ramp colour %d is %.2f from its formula", i, d)
		}
	}
}

func TestLabelsAndPaletteGoTogether(t *testing.T) {
	for _, lead := range []string{"", "BVCEO"} {
		labels := StateLabels(lead)
		if len(labels) != len(DefaultPalette) {
			t.Errorf("%d labels, %d colours", len(labels), len(DefaultPalette))
		}
		seen := map[string]bool{}
		for _, l := range labels {
			if l == "" || seen[l] {
				t.Errorf("label %q", l)
			}
			seen[l] = true
		}
	}
}
