package synth

import "testing"

// BenchmarkRandom draws and makes a small lot of the demo's product with one cause,
// by either physics.
func BenchmarkRandom(b *testing.B) {
	m, err := NewMaker(demoProductFile(b))
	if err != nil {
		b.Fatal(err)
	}
	if err := m.Prepare(); err != nil {
		b.Fatal(err)
	}
	for _, physics := range []string{"laws", "junction"} {
		for _, step := range []string{"draw", "make"} {
			b.Run(physics+"/"+step, func(b *testing.B) {
				var made *Made
				seed := uint64(0)
				for b.Loop() {
					seed++
					if made == nil || step == "draw" {
						made, err = m.Random(RandomOptions{Seed: seed, Wafers: 12, Dice: 300, Physics: physics, Causes: []Wanted{{ID: "epi-thickness"}}})
						if err != nil {
							b.Fatal(err)
						}
					}
					if step == "make" {
						made.Generate()
					}
				}
			})
		}
	}
}

// BenchmarkPhysics builds one variant of the device model.
func BenchmarkPhysics(b *testing.B) {
	p := demoProductFile(b)
	n := 0
	for b.Loop() {
		n++
		if _, err := NewPhysics(p, n); err != nil {
			b.Fatal(err)
		}
	}
}
