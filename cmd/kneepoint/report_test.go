package main

import (
	"bytes"
	"encoding/json"
	"os"
	"strings"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"

	"kneepoint/ingest/synth"
	"kneepoint/reports"
)

// readReport reads a report and checks it against the committed schema.
func readReport(t *testing.T, path string) *reports.Report {
	t.Helper()
	data, err := os.ReadFile(path)
	if err != nil {
		t.Fatal(err)
	}
	return parseReport(t, data)
}

func parseReport(t *testing.T, data []byte) *reports.Report {
	t.Helper()
	schema, err := jsonschema.UnmarshalJSON(bytes.NewReader(reports.Schema))
	if err != nil {
		t.Fatal(err)
	}
	c := jsonschema.NewCompiler()
	if err := c.AddResource("report.json", schema); err != nil {
		t.Fatal(err)
	}
	compiled, err := c.Compile("report.json")
	if err != nil {
		t.Fatal(err)
	}
	value, err := jsonschema.UnmarshalJSON(bytes.NewReader(data))
	if err != nil {
		t.Fatalf("the report is no JSON: %v", err)
	}
	if err := compiled.Validate(value); err != nil {
		t.Errorf("the report breaks its schema: %v", err)
	}
	var r reports.Report
	if err := json.Unmarshal(data, &r); err != nil {
		t.Fatal(err)
	}
	return &r
}

// An STDF file that says how large wafers and dice are is mapped without a product
// file.
func TestGeometryOfTheFile(t *testing.T) {
	t.Chdir(t.TempDir())
	os.WriteFile("product.yaml", []byte(synth.DemoProductYAML), 0o644)
	kneepoint(t, "synth", "-p", "product.yaml", "--cause", "edge-dice", "--wafers", "3", "--format", "stdf", "-o", ".")
	if out := kneepoint(t, "inspect", "MADE-UP-1.stdf"); !strings.Contains(out, "geometry wafer 100 mm; die 2.2 x 2.2 mm; flat or notch down") {
		t.Errorf("inspect says nothing of the wafers' size:\n%s", out)
	}
	kneepoint(t, "triage", "MADE-UP-1.stdf", "-o", "out")
	g := readReport(t, "out/MADE-UP-1.json").Geometry
	if g.DiameterMM != 100 || g.DieWidthMM != 2.2 {
		t.Errorf("the report has wafers of %g mm and dice of %g mm, the file 100 and 2.2", g.DiameterMM, g.DieWidthMM)
	}
}
