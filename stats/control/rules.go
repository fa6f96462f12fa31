package control

import "math"

// Rules are the points at which each of Nelson's eight tests signals. A test
// signals at the last point of the run that it looks for; Rules[0] is test 1.
//
// In brackets the rate of false signals per point once enough points are there, for
// independent normal points; they follow from the definitions, and Nelson 1984
// prints those without a second number and the Any forms:
//
//	1  beyond 3 sigma [0.0027]
//	2  nine in a row on one side of the centre [0.0039]
//	3  six in a row rising, or falling [0.0028]
//	4  fourteen in a row alternating up and down [0.0046]
//	5  two of three in a row beyond 2 sigma on the same side [0.0020; 0.0031 Any]
//	6  four of five in a row beyond 1 sigma on the same side [0.0045; 0.0055 Any]
//	7  fifteen in a row within 1 sigma [0.0033]
//	8  eight in a row beyond 1 sigma, on both sides [0.0001]
//
// Tests 5 and 6 signal when the last point is itself beyond; the Any forms, as some
// books have them, also while the others stay in the window. Test 8 asks for at
// least one point on each side; OneSided does not.
type Rules struct {
	Signals       [8][]int
	Any5, Any6    []int
	OneSided8     []int
	Center, Sigma float64
}

// Nelson applies the eight tests to points with the given centre and standard
// deviation. Missing points are passed over, as if their neighbours followed each
// other. A point exactly on the centre or on a zone's line is on neither side of
// it. With a sigma that is not positive there are no signals but tests 2 to 4.
//
// Which tests to use is a choice: each adds its false alarms. Tests 1, 2, 5 and 6
// find shifts; 3 finds drifts; 4 two alternating sources; 7 and 8 wrong limits or
// mixed sources.
//
// Source: Nelson 1984, J. Quality Technology 16, 237-239.
func Nelson(x []float64, center, sigma float64) Rules {
	var z []float64
	var place []int
	for i, v := range x {
		if v == v {
			d := float64(sign(v-center)) * math.SmallestNonzeroFloat64 // a side and no more
			if sigma > 0 {
				d = (v - center) / sigma
			}
			z = append(z, d)
			place = append(place, i)
		}
	}
	r := Rules{Center: center, Sigma: sigma, Any5: []int{}, Any6: []int{}, OneSided8: []int{}}
	for k := range r.Signals {
		r.Signals[k] = []int{}
	}
	signal := func(rule, i int) { r.Signals[rule-1] = append(r.Signals[rule-1], place[i]) }

	var side, trend, turns, within, beyond run // lengths of the current runs
	for i := range z {
		if math.Abs(z[i]) > 3 {
			signal(1, i)
		}
		if side.next(sign(z[i])) >= 9 {
			signal(2, i)
		}
		step := 0
		if i > 0 {
			step = sign(x[place[i]] - x[place[i-1]])
		}
		before := trend.of
		if trend.next(step) >= 5 {
			signal(3, i)
		}
		// Alternating: each step has the opposite sign of the one before.
		switch {
		case step == 0:
			turns.length = 0
		case before == -step:
			turns.length++
		default:
			turns.length = 1
		}
		if turns.length >= 13 {
			signal(4, i)
		}
		for _, s := range []float64{1, -1} {
			if two := count(z, i, 3, 2, s); two >= 2 {
				r.Any5 = appendNew(r.Any5, place[i])
				if s*z[i] > 2 {
					signal(5, i)
				}
			}
			if four := count(z, i, 5, 1, s); four >= 4 {
				r.Any6 = appendNew(r.Any6, place[i])
				if s*z[i] > 1 {
					signal(6, i)
				}
			}
		}
		if sigma > 0 && within.next(truth(math.Abs(z[i]) < 1)) >= 15 {
			signal(7, i)
		}
		if beyond.next(truth(math.Abs(z[i]) > 1)) >= 8 {
			r.OneSided8 = append(r.OneSided8, place[i])
			if count(z, i, 8, 1, 1) > 0 && count(z, i, 8, 1, -1) > 0 {
				signal(8, i)
			}
		}
	}
	return r
}

// run counts how often in a row the same thing happened; 0 is nothing.
type run struct{ of, length int }

func (r *run) next(of int) int {
	switch {
	case of == 0:
		r.length = 0
	case of == r.of:
		r.length++
	default:
		r.length = 1
	}
	r.of = of
	return r.length
}

func sign(v float64) int {
	switch {
	case v > 0:
		return 1
	case v < 0:
		return -1
	}
	return 0
}

func truth(b bool) int {
	if b {
		return 1
	}
	return 0
}

// count is how many of the last w points up to i are beyond limit on side s; 0
// before there are w.
func count(z []float64, i, w int, limit, s float64) int {
	n := 0
	if i < w-1 {
		return 0
	}
	for j := i - w + 1; j <= i; j++ {
		if s*z[j] > limit {
			n++
		}
	}
	return n
}

func appendNew(list []int, i int) []int {
	if n := len(list); n > 0 && list[n-1] == i {
		return list
	}
	return append(list, i)
}
