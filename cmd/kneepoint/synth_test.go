package main

import (
	"bytes"
	"context"
	"encoding/json"
	"math"
	"os"
	"regexp"
	"slices"
	"strings"
	"testing"

	"kneepoint/ingest"
	"kneepoint/ingest/synth"
)

// made reads a truth file.
func made(t *testing.T, path string) (truth synth.Truth) {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	if err := json.Unmarshal(data, &truth); err != nil {
		t.Fatal(err)
	}
	return truth
}

// TestSynth makes one lot in every format: each is read back with the product file
// beside it, and yields what the truth file says.
func TestSynth(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("product.yaml", []byte(synth.DemoProductYAML), 0o644)
	for format, file := range map[string]string{"csv": "MADE-UP-3.csv", "long": "MADE-UP-3.csv", "stdf": "MADE-UP-3.stdf", "parquet": "MADE-UP-3.parquet"} {
		out := kneepoint(t, "synth", "-p", "product.yaml", "--cause", "emitter-efficiency:low", "--cause", "edge-dice::0.9", "--affected", "2,4-5",
			"--wafers", "6", "--dice", "150", "--seed", "3", "--format", format, "-o", format)
		truth := made(t, format+"/MADE-UP-3.truth.json")
		n := len(truth.Causes)
		gain, edge := truth.Causes[n-2], truth.Causes[n-1]
		if gain.ID != "emitter-efficiency" || gain.Direction != "low" || edge.ID != "edge-dice" || edge.Size != 0.9 ||
			!slices.Equal(gain.Wafers, []string{"02", "04", "05"}) || gain.Dice == 0 || gain.Loss <= 0 || edge.Loss <= 0 {
			t.Errorf("%s: %+v, %+v", format, gain, edge)
		}
		for _, want := range []string{"900 dice on 6 wafers, 9 tests", "emitter-efficiency low", "of wafers 02, 04, 05", "truth.json", "product.yaml, with the die size"} {
			if !strings.Contains(out, want) {
				t.Errorf("%s: output lacks %q:\n%s", format, want, out)
			}
		}
		product, err := loadProduct(format + "/MADE-UP-3.product.yaml")
		if err != nil {
			t.Fatal(err)
		}
		batch, err := ingest.Read(context.Background(), []string{format + "/" + file}, ingest.Options{Product: product})
		if err != nil {
			t.Fatal(err)
		}
		lot, pass := batch.Lots[0], 0
		for _, bin := range lot.HardBin() {
			if product.Bins.PassBin(int(bin)) {
				pass++
			}
		}
		if got := float64(pass) / float64(lot.Len()); lot.Len() != truth.Dice || math.Abs(got-truth.Yield) > 1e-9 {
			t.Errorf("%s: %d dice yield %v, the truth file says %d and %v", format, lot.Len(), got, truth.Dice, truth.Yield)
		}
	}
	again := func(dir string) []byte {
		kneepoint(t, "synth", "-p", "product.yaml", "--wafers", "2", "--dice", "60", "--cause", "lifetime", "-o", dir)
		data, err := os.ReadFile(dir + "/MADE-UP-1.csv")
		if err != nil {
			t.Fatal(err)
		}
		return data
	}
	if !bytes.Equal(again("a"), again("b")) {
		t.Error("the same command gives other bytes")
	}
}

// TestSynthRefuses: one clear line each, and nothing written.
func TestSynthRefuses(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("product.yaml", []byte(synth.DemoProductYAML), 0o644)
	os.WriteFile("pnp.yaml", []byte(strings.Replace(synth.DemoProductYAML, "polarity: npn", "polarity: pnp", 1)), 0o644)
	os.WriteFile("bare.yaml", []byte("product: P\ntests:\n  - {name: RATIO, lower: 1}\n"), 0o644)
	for _, c := range []struct {
		args []string
		want string
	}{
		{nil, `no product file is named`},
		{[]string{"-p", "none.yaml"}, `none\.yaml`},
		{[]string{"-p", "pnp.yaml"}, `pnp\.yaml.*polarity.*pnp`},
		{[]string{"-p", "bare.yaml"}, `bare\.yaml.*device block.*bvceo`},
		{[]string{"-p", "product.yaml", "--cause", "gremlins"}, `gremlins.*epi-thickness`},
		{[]string{"-p", "product.yaml", "--cause", "epi-thickness:thin"}, `"thin".*low, high`},
		{[]string{"-p", "product.yaml", "--cause", "epi-thickness:low:much"}, `"much" is no size`},
		{[]string{"-p", "product.yaml", "--cause", "epi-thickness:low:-1"}, `"-1" is no size`},
		{[]string{"-p", "product.yaml", "--affected", "3,99"}, `"99".*1 to 25`},
		{[]string{"-p", "product.yaml", "--wafers", "0"}, `--wafers 0: use 1 to`},
		{[]string{"-p", "product.yaml", "--dice", "-5"}, `--dice -5`},
		{[]string{"-p", "product.yaml", "--format", "tape"}, `tape.*csv, long, stdf or parquet`},
	} {
		var stdout, stderr bytes.Buffer
		code := run(context.Background(), append([]string{"synth"}, c.args...), &stdout, &stderr)
		if code != exitFailed || stdout.Len() > 0 || !regexp.MustCompile(`^error: .*`+c.want).MatchString(stderr.String()) {
			t.Errorf("synth %v: exit %d, stdout %q, stderr %q", c.args, code, stdout.String(), stderr.String())
		}
		if strings.Count(stderr.String(), "error:") > 1 {
			t.Errorf("synth %v: more than one error: %s", c.args, stderr.String())
		}
	}
	if _, err := os.Stat("out"); err == nil {
		t.Error("something was written")
	}
}
