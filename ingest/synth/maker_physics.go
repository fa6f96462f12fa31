package synth

import (
	"fmt"
	"strings"
)

// drawPhysics picks what turns latents into readings: half of the lots follow the
// laws with slopes drawn around the reference model's, half a variant of the device
// model.
func (m *Maker) drawPhysics(s *Spec, d *draws, want string) string {
	either, n := d.chance(0.5), d.below(physicsVariants)
	if got, _ := fmt.Sscanf(want, "junction %d", &n); got == 1 {
		n = min(max(n, 0), physicsVariants-1)
	}
	if strings.HasPrefix(want, "junction") || want == "" && either {
		if f := m.physics(n); f != nil {
			s.Physics = f
			return fmt.Sprintf("junction %d", n)
		}
	}
	s.Laws = randomLaws(d, s.Laws)
	return "laws"
}

// randomLaws draws slopes around others. How far is common practice, no source:
// about as far as the two reference devices lie apart.
func randomLaws(d *draws, l Laws) Laws {
	vary := func(v *float64, sigma float64) { *v *= d.factor(sigma) }
	for _, p := range []*Process{&l.HFE, &l.BVCBO, &l.Pinch} {
		for q := range p {
			vary(&p[q], 0.12)
		}
	}
	l.HFE[EmitterGummel] = 0.99
	vary(&l.CriticalField, 0.3)
	vary(&l.Gain, 0.12)
	vary(&l.BVEBODose, 0.2)
	vary(&l.ChargeBVCBO, 0.4)
	vary(&l.PlaneRatio, 0.1)
	vary(&l.Stray, 0.3)
	vary(&l.Modulation, 0.25)
	vary(&l.CollectorW, 0.05)
	vary(&l.CollectorN, 0.12)
	vary(&l.FixedResistance, 0.3)
	vary(&l.Recombination, 0.3)
	vary(&l.SurfaceShare, 0.4)
	vary(&l.SurfaceLeak, 0.4)
	vary(&l.GenerationWidth, 0.3)
	l.LeakMiller = d.between(4, 9)
	l.LeakDouble = d.between(8, 12)
	l.GainTemperature = d.between(0.004, 0.008)
	return l
}
