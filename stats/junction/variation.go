package junction

// Variation is another belief about silicon and geometry than this package's own,
// for simulators and rehearsals that must not lean on the formulas they test. Zero
// values mean the usual; numbers multiply it.
type Variation struct {
	FieldScale      float64 // fields of the ionisation law: 1.05 is about 7 % more BV
	Narrowing       float64 // band-gap narrowing in the base
	Tunnelling      float64 // field of field-enhanced generation
	Recombination   float64 // emitter-base recombination
	OxideDepth      float64 // depth of epi over which oxide charge counts
	Spreading       float64 // tangent of the angle at which collector current spreads
	ExponentialBase bool    // base doping falls as exp(-x/L), not as a Gaussian
}

// NewVariant is [NewModel] under another belief. Give it tests without baselines,
// else anchoring takes out part of the difference; what remains after anchoring is
// what an inversion has to live with.
func NewVariant(device Device, v Variation, tests ...Test) (*Model, error) {
	n := natural
	for _, f := range []struct {
		dst *float64
		by  float64
	}{{&n.fieldScale, v.FieldScale}, {&n.narrowing, v.Narrowing}, {&n.tunnel, v.Tunnelling},
		{&n.recombine, v.Recombination}, {&n.overlay, v.OxideDepth}, {&n.spread, v.Spreading}} {
		if f.by > 0 {
			*f.dst *= f.by
		}
	}
	if v.ExponentialBase {
		n.base = exponentialBase
	}
	return newModel(device, n, tests)
}
