package junction

import "testing"

func BenchmarkExact(b *testing.B) {
	refs, err := references("../../testdata/physics")
	if err != nil {
		b.Fatal(err)
	}
	r := refs["B"]
	dev, nat := r.device(), natural
	b.Run("make", func(b *testing.B) {
		for b.Loop() {
			dev.make(&Process{}, &nat)
		}
	})
	x := dev.make(&Process{}, &nat)
	for _, name := range sortedKeys(r.Jacobian) {
		t, _ := r.test(name)
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				x.value(&t)
			}
		})
	}
}

func BenchmarkInvert(b *testing.B) {
	m, err := NewModel(demoDevice(), demoTests()...)
	if err != nil {
		b.Fatal(err)
	}
	var r []Reading
	for i := range m.Tests {
		r = append(r, Reading{Test: i, LogRatio: 0.02})
	}
	prior := UsualPrior()
	for b.Loop() {
		m.Invert(r, prior)
	}
}
