package page

import (
	"math"

	"kneepoint/reports"
)

// span is what an axis of a test's values covers.
type span struct {
	Low, High float64
	Log       bool
}

// reach is how far a limit may lie outside the data, in lengths of the data,
// and still be drawn: further out it would squeeze the data into a corner.
const reach = 0.7

// include stretches the span to a limit, and reports whether it did: a limit
// too far away is left out, and said.
func (s *span) include(v float64) bool {
	low, high, at := s.Low, s.High, v
	if s.Log {
		if v <= 0 {
			return false
		}
		low, high, at = math.Log10(low), math.Log10(high), math.Log10(v)
	}
	length := high - low
	if at < low-reach*length || at > high+reach*length {
		return false
	}
	s.Low, s.High = min(s.Low, v), max(s.High, v)
	return true
}

// pad adds a margin on both sides.
func (s *span) pad(share float64) {
	if s.Log {
		f := max(math.Pow(s.High/s.Low, share), 1.05)
		s.Low, s.High = s.Low/f, s.High*f
		return
	}
	d := share * (s.High - s.Low)
	if d == 0 { // one value only
		d = max(math.Abs(s.High)*0.05, 1e-12)
	}
	s.Low, s.High = s.Low-d, s.High+d
}

// place is where v lies on the span, 0 to 1.
func (s span) place(v float64) float64 {
	if s.Log {
		return math.Log(v/s.Low) / math.Log(s.High/s.Low)
	}
	return (v - s.Low) / (s.High - s.Low)
}

// ticks are round numbers inside the span, about n of them.
func (s span) ticks(n int) []float64 {
	if !(s.High > s.Low) || math.IsInf(s.High-s.Low, 0) {
		return nil
	}
	if s.Log {
		decades := math.Log10(s.High / s.Low)
		if decades >= 0.9 {
			return s.logTicks(decades, n)
		}
	}
	step := niceStep((s.High - s.Low) / float64(n))
	var out []float64
	for i := math.Ceil(s.Low / step); i*step <= s.High*(1+1e-12) && len(out) < 50; i++ {
		v, _ := plot(reports.Number(i * step)).(float64)
		out = append(out, v)
	}
	return out
}

func (s span) logTicks(decades float64, n int) []float64 {
	multiples := []float64{1}
	switch {
	case decades < 2:
		multiples = []float64{1, 2, 5}
	case decades < 3:
		multiples = []float64{1, 3}
	}
	every := max(1, int(math.Ceil(decades/float64(n+2))))
	var out []float64
	for e := int(math.Floor(math.Log10(s.Low))); float64(e) <= math.Log10(s.High); e++ {
		if e%every != 0 {
			continue
		}
		for _, m := range multiples {
			v, _ := plot(reports.Number(m * math.Pow(10, float64(e)))).(float64)
			if v >= s.Low && v <= s.High {
				out = append(out, v)
			}
		}
	}
	return out
}

// niceStep rounds up to 1, 2 or 5 times a power of ten.
func niceStep(raw float64) float64 {
	p := math.Pow(10, math.Floor(math.Log10(raw)))
	for _, m := range []float64{1, 2, 5} {
		if raw <= m*p*(1+1e-9) {
			return m * p
		}
	}
	return 10 * p
}
