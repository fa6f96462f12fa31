package dist

import (
	"math"

	"kneepoint/stats/internal/tail"
)

// shapiroWilk is Royston's W of sorted readings that are not all equal.
func shapiroWilk(v []float64) Goodness {
	n := len(v)
	if n > 5000 {
		return noGoodness(n, "more than 5,000 readings, for which W has no known p")
	}
	a := shapiroWeights(n)
	// W = (sum a_i x_i)^2 / sum (x_i - mean)^2, on readings scaled by their range.
	span := v[n-1] - v[0]
	mean := 0.0
	for _, x := range v {
		mean += (x - v[0]) / span
	}
	mean /= float64(n)
	var aa, ax, xx float64
	for i, x := range v {
		w := 0.0
		switch half := n / 2; {
		case i < half:
			w = -a[i]
		case i >= n-half:
			w = a[n-1-i]
		}
		d := (x-v[0])/span - mean
		aa += w * w
		ax += w * d
		xx += d * d
	}
	// 1 - W as a difference of squares, which keeps the digits of a W near 1.
	root := math.Sqrt(aa * xx)
	left := (root - ax) * (root + ax) / (aa * xx)
	return Goodness{Statistic: 1 - left, P: shapiroP(left, float64(n)), N: n}
}

// shapiroWeights are the weights of the lower half, positive.
func shapiroWeights(n int) []float64 {
	half := n / 2
	a := make([]float64, half)
	if n == 3 {
		a[0] = math.Sqrt(0.5)
		return a
	}
	m := make([]float64, half)
	sum := 0.0
	for i := range m { // expected normal order statistics, nearly (Blom)
		m[i] = tail.NormalQuantile((float64(i+1) - 0.375) / (float64(n) + 0.25))
		sum += m[i] * m[i]
	}
	sum *= 2
	root := math.Sqrt(sum)
	u := 1 / math.Sqrt(float64(n))
	a[0] = poly(u, 0, .221157, -.147981, -2.07119, 4.434685, -2.706056) - m[0]/root
	first := 1
	var scale float64
	if n > 5 {
		first = 2
		a[1] = -m[1]/root + poly(u, 0, .042981, -.293762, -1.752461, 5.682633, -3.582633)
		scale = math.Sqrt((sum - 2*m[0]*m[0] - 2*m[1]*m[1]) / (1 - 2*a[0]*a[0] - 2*a[1]*a[1]))
	} else {
		scale = math.Sqrt((sum - 2*m[0]*m[0]) / (1 - 2*a[0]*a[0]))
	}
	for i := first; i < half; i++ {
		a[i] = -m[i] / scale
	}
	return a
}

// shapiroP is the p for 1 - W = left.
func shapiroP(left, n float64) float64 {
	if n == 3 {
		const at, six = 1.0471975511965976, 1.909859 // asin(sqrt(3/4)), 6/pi
		return math.Max(0, six*(math.Asin(math.Sqrt(1-left))-at))
	}
	y := math.Log(left)
	var mean, sd float64
	if n <= 11 {
		g := poly(n, -2.273, .459)
		if y >= g {
			return 1e-99 // as small as the fit goes
		}
		y = -math.Log(g - y)
		mean = poly(n, .544, -.39978, .025054, -6.714e-4)
		sd = math.Exp(poly(n, 1.3822, -.77857, .062767, -.0020322))
	} else {
		l := math.Log(n)
		mean = poly(l, -1.5861, -.31082, -.083751, .0038915)
		sd = math.Exp(poly(l, -.4803, -.082676, .0030302))
	}
	return tail.Normal((y - mean) / sd)
}

// poly is c0 + c1 x + c2 x^2 ...
func poly(x float64, c ...float64) float64 {
	s := 0.0
	for i := len(c) - 1; i >= 0; i-- {
		s = s*x + c[i]
	}
	return s
}
