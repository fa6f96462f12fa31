package main

import (
	"bytes"
	"context"
	"os"
	"os/exec"
	"path/filepath"
	"testing"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/causes"
	"kneepoint/reports/rehearse"
)

// BenchmarkTriage is the whole of kneepoint triage on a lot of 25 wafers of 4,000 dice, of
// which a third have lost epi thickness: the program started anew, the CSV read, the causes
// named, HTML and JSON written. The product's calibration and device model are in the cache.
// 2 s on two cores is the limit.
func BenchmarkTriage(b *testing.B) {
	dir := b.TempDir()
	bin, cache := filepath.Join(dir, "kneepoint"), filepath.Join(dir, "cache")
	if out, err := exec.Command("go", "build", "-o", bin, ".").CombinedOutput(); err != nil {
		b.Fatalf("go build: %v\n%s", err, out)
	}
	demo := filepath.Join(dir, "demo.yaml")
	if err := os.WriteFile(demo, []byte(synth.DemoProductYAML), 0o666); err != nil {
		b.Fatal(err)
	}
	var stdout, stderr bytes.Buffer
	if run(context.Background(), []string{"synth", "-p", demo, "-o", dir, "--dice", "4000", "--seed", "3",
		"--cause", "epi-thickness:low", "--affected", "17-25"}, &stdout, &stderr) != exitDone {
		b.Fatal(stderr.String())
	}
	lots, err := filepath.Glob(filepath.Join(dir, "*.csv"))
	if err != nil || len(lots) != 1 {
		b.Fatal(lots, err)
	}
	file := lots[0][:len(lots[0])-len(".csv")] + ".product.yaml"
	p, err := config.LoadProduct(file)
	if err != nil {
		b.Fatal(err)
	}
	// what a calibration finds makes no difference to the time
	if err := rehearse.Store(cache, p, rehearse.NewCalibration(p, causes.UsualWeights(), rehearse.Summary{})); err != nil {
		b.Fatal(err)
	}
	cpu := 0.0
	triage := func() {
		c := exec.Command(bin, "triage", lots[0], "-p", file, "-o", filepath.Join(dir, "out"))
		c.Env = append(os.Environ(), "KNEEPOINT_CACHE="+cache, "KNEEPOINT_CALIBRATE="+calibrateAuto)
		if out, err := c.CombinedOutput(); err != nil {
			b.Fatalf("%v\n%s", err, out)
		}
		cpu += (c.ProcessState.UserTime() + c.ProcessState.SystemTime()).Seconds()
	}
	triage() // keeps the model
	cpu = 0
	for b.Loop() {
		triage()
	}
	b.ReportMetric(cpu/float64(b.N), "cpu-s/op")
}
