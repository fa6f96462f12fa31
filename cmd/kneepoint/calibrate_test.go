package main

import (
	"bytes"
	"context"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/spf13/cobra"

	"kneepoint/config"
	"kneepoint/ingest/synth"
	"kneepoint/reports/causes"
	"kneepoint/reports/rehearse"
)

// asked runs newDiagnosis as a command would, with few lots.
func asked(t *testing.T, p *config.Product, mode string) (calibrated string, w causes.Weights, messages string, err error) {
	t.Helper()
	was := calibration
	calibration = rehearse.Options{Lots: 8, Physics: "laws"}
	defer func() { calibration = was }()
	c := &cobra.Command{}
	var stderr bytes.Buffer
	c.SetErr(&stderr)
	c.SetContext(context.Background())
	d, err := newDiagnosis(c, p, mode)
	if err != nil {
		return "", w, stderr.String(), err
	}
	return d.Calibrated, d.Weights, stderr.String(), nil
}

// TestCalibrationIsKept: the first lot of a product calibrates and says so, the next
// takes what was kept; a damaged file is warned of and written again.
func TestCalibrationIsKept(t *testing.T) {
	dir := filepath.Join(t.TempDir(), "cache")
	t.Setenv("KNEEPOINT_CACHE", dir)
	p := synth.ClassProducts("COB2")[0]

	text, first, said, err := asked(t, p, "auto")
	if err != nil || text == "" || !strings.Contains(said, "calibrating causes on 8 made-up lots") {
		t.Fatalf("first: %q, %q, %v", text, said, err)
	}
	_, again, said, err := asked(t, p, "auto")
	if err != nil || again != first || said != "" {
		t.Errorf("second: weights %v after %v, %q, %v", again, first, said, err)
	}
	text, off, said, err := asked(t, p, "off")
	if err != nil || text != "" || off != causes.UsualWeights() || said != "" {
		t.Errorf("off: %q, %v, %q, %v", text, off, said, err)
	}
	if err := os.WriteFile(rehearse.Stored(dir, p), []byte("{"), 0o644); err != nil {
		t.Fatal(err)
	}
	_, mended, said, err := asked(t, p, "auto")
	if err != nil || mended != first || !strings.HasPrefix(said, "warning: ") || !strings.Contains(said, "calibrating again") {
		t.Errorf("damaged: %v, %q, %v", mended, said, err)
	}
	if kept, err := rehearse.Load(dir, p); err != nil || kept == nil || kept.Weights != first {
		t.Errorf("the damaged file was not written again: %v, %v", kept, err)
	}
}

// TestCalibrationElsewhere: what needs no calibration, and what can have none.
func TestCalibrationElsewhere(t *testing.T) {
	t.Setenv("KNEEPOINT_CACHE", "off")
	demo, err := config.ParseProduct("demo.yaml", []byte(synth.DemoProductYAML))
	if err != nil {
		t.Fatal(err)
	}
	if text, _, said, err := asked(t, demo, "auto"); err != nil || said != "" || !strings.Contains(text, "calibrated on 320") {
		t.Errorf("the demo's product: %q, %q, %v", text, said, err)
	}
	if text, _, said, err := asked(t, nil, "auto"); err != nil || text != "" || said != "" {
		t.Errorf("no product: %q, %q, %v", text, said, err)
	}
	if _, _, _, err := asked(t, demo, "often"); err == nil || !strings.Contains(err.Error(), "auto, again or off") {
		t.Errorf("a mode that is none: %v", err)
	}
	pnp := *demo
	device := *demo.Device
	device.Polarity, pnp.Device, pnp.SHA256 = "pnp", &device, strings.Repeat("0", 64)
	if text, w, said, err := asked(t, &pnp, "auto"); err != nil || text != "" || w != causes.UsualWeights() || !strings.Contains(said, "warning: causes are not calibrated") {
		t.Errorf("a pnp product: %q, %q, %v", text, said, err)
	}
}

// TestRehearseRefuses: bad usage is one line.
func TestRehearseRefuses(t *testing.T) {
	for _, c := range []struct {
		args []string
		want string
	}{
		{[]string{"rehearse"}, "no product file is named"},
		{[]string{"rehearse", "-p", "nowhere.yaml"}, "nowhere.yaml"},
		{[]string{"rehearse", "-p", "x.yaml", "--lots", "3"}, "--lots 3"},
	} {
		var stdout, stderr bytes.Buffer
		if code := run(context.Background(), c.args, &stdout, &stderr); code != exitFailed || !strings.Contains(stderr.String(), c.want) {
			t.Errorf("%v: exit %d, %q", c.args, code, stderr.String())
		}
	}
}
