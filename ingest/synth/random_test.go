package synth

import (
	"math"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// TestMix: the first numbers of splitmix64 seeded with 1234567, as commonly
// published with that generator (from memory).
func TestMix(t *testing.T) {
	state := uint64(1234567)
	for i, want := range []uint64{6457827717110365317, 3203168211198807973, 9817491932198370423} {
		state += golden
		if got := mix(state); got != want {
			t.Errorf("number %d: %d, want %d", i, got, want)
		}
	}
}

// TestNumbers: uniforms fill (0, 1) evenly, normals have the moments of a
// normal, and numbers of neighbouring dice, wafers and quantities do not know
// each other. Bounds are five standard errors.
func TestNumbers(t *testing.T) {
	const side = 200
	n := side * side
	columns := make([][]float64, 4) // this die; its right neighbour; the next wafer; the next quantity
	cells := make([]float64, 64)
	for y := range int32(side) {
		for x := range int32(side) {
			columns[0] = append(columns[0], dieKey(7, 0, x-100, y-100).at(0).normal())
			columns[1] = append(columns[1], dieKey(7, 0, x-99, y-100).at(0).normal())
			columns[2] = append(columns[2], dieKey(7, 1, x-100, y-100).at(0).normal())
			columns[3] = append(columns[3], dieKey(7, 0, x-100, y-100).at(1).normal())
			cells[int(64*dieKey(7, 0, x-100, y-100).at(0).uniform())]++
		}
	}
	chi := 0.0
	for _, c := range cells {
		chi += math.Pow(c-float64(n)/64, 2) / (float64(n) / 64)
	}
	if chi > 63+5*math.Sqrt(2*63) {
		t.Errorf("uniforms are uneven: chi-squared %.0f on 63", chi)
	}
	se := 1 / math.Sqrt(float64(n))
	for i, c := range columns {
		mean, sd := stat.MeanStdDev(c, nil)
		if math.Abs(mean) > 5*se || math.Abs(sd-1) > 5*se || math.Abs(stat.ExKurtosis(c, nil)) > 5*math.Sqrt(24)*se {
			t.Errorf("normals %d: mean %.4f, sd %.4f, excess kurtosis %.3f", i, mean, sd, stat.ExKurtosis(c, nil))
		}
		if r := stat.Correlation(columns[0], c, nil); i > 0 && math.Abs(r) > 5*se {
			t.Errorf("normals 0 and %d correlate: %.4f", i, r)
		}
	}
}
