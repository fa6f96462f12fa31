package main

import (
	"bytes"
	"encoding/json"
	"os"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"

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
