package dist

import "math"

// logPhi is ln of the standard normal distribution function, good to the far
// tail where the function itself underflows.
func logPhi(z float64) float64 {
	switch {
	case z > 0:
		return math.Log1p(-0.5 * math.Erfc(z/math.Sqrt2))
	case z > -36:
		return math.Log(0.5 * math.Erfc(-z/math.Sqrt2))
	}
	return -z*z/2 - math.Log(-z) - 0.5*math.Log(2*math.Pi) + math.Log(farTail(z))
}

// hazard is phi(z)/Phi(z), the derivative of logPhi.
func hazard(z float64) float64 {
	if z > -36 {
		return phi(z) / (0.5 * math.Erfc(-z/math.Sqrt2))
	}
	return -z / farTail(z)
}

// farTail is -z Phi(z)/phi(z) for far negative z by its asymptotic series
// (Abramowitz and Stegun 26.2.12).
func farTail(z float64) float64 {
	w := 1 / (z * z)
	return 1 - w*(1-3*w*(1-5*w*(1-7*w)))
}

func phi(z float64) float64 { return math.Exp(-z*z/2) / math.Sqrt(2*math.Pi) }

// logBetween returns ln(Phi(b)-Phi(a)) for a < b, and phi(a) and phi(b) over
// that difference.
func logBetween(a, b float64) (l, ha, hb float64) {
	if a > 0 { // work in the lower tail, where differences keep their digits
		l, hb, ha = logBetween(-b, -a)
		return l, ha, hb
	}
	density := func(z float64) float64 { // ln phi
		return -z*z/2 - 0.5*math.Log(2*math.Pi)
	}
	if w := b - a; w < 1e-4 {
		m := (a + b) / 2
		l = density(m) + math.Log(w) + math.Log1p((m*m-1)*w*w/24)
	} else {
		top := logPhi(b)
		l = top + math.Log1p(-math.Exp(logPhi(a)-top))
	}
	over := func(z float64) float64 {
		if math.IsInf(z, 0) {
			return 0
		}
		return math.Exp(density(z) - l)
	}
	return l, over(a), over(b)
}
