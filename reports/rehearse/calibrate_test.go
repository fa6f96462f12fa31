package rehearse

import (
	"context"
	"fmt"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest/synth"
)

func demoProduct(t testing.TB) *config.Product {
	t.Helper()
	p, err := config.ParseProduct("demo.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		t.Fatal(err)
	}
	return p
}

func BenchmarkCalibrate(b *testing.B) {
	p := demoProduct(b)
	for b.Loop() {
		w, s, err := Calibrate(context.Background(), p, Options{Lots: 32, Seed: 1})
		if err != nil {
			b.Fatal(err)
		}
		fmt.Printf("%+v %+v\n", w, s)
	}
}
