package config

import (
	"fmt"
	"os"
	"regexp"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/spf13/viper"
)

// docBlocks returns the indented blocks of the package comment.
func docBlocks(t *testing.T) (text string, blocks []string) {
	t.Helper()
	data, err := os.ReadFile("doc.go")
	if err != nil {
		t.Fatal(err)
	}
	block := ""
	for _, line := range strings.Split(string(data), "\n") {
		if code, ok := strings.CutPrefix(line, "//\t"); ok {
			block += code + "\n"
		} else if block != "" {
			blocks, block = append(blocks, block), ""
		}
	}
	return string(data), blocks
}

// The package comment's examples load, and it names every key there is.
func TestPackageComment(t *testing.T) {
	text, blocks := docBlocks(t)
	if len(blocks) != 2 {
		t.Fatalf("%d examples", len(blocks))
	}
	p, err := ParseProduct("doc.yaml", []byte(blocks[0]))
	if err != nil || len(p.Tests) != 3 || p.Device.Epi.UpDiffusionUM != (Quantity{0.05, 0.01}) {
		t.Errorf("%+v, %v", p, err)
	}
	s, err := LoadSettings(viper.New(), settingsFile(t, "doc.yaml", blocks[1]))
	if diff := cmp.Diff(DefaultSettings(), s); err != nil || diff != "" {
		t.Errorf("%v\n%s", err, diff)
	}
	keys := append([]string{}, settingKeys...)
	for _, k := range schema {
		keys = append(keys, k...)
	}
	for _, k := range append(keys, Measures...) {
		if !regexp.MustCompile(`\b` + k + `\b`).MatchString(text) {
			t.Errorf("the package comment does not name %s", k)
		}
	}
	for role := range measuredIn {
		if matchKey(role, Measures) == "" {
			t.Errorf("%s is no role", role)
		}
	}
	for _, m := range Measures {
		if measuredIn[m] == "" || spellings[m] == nil {
			t.Errorf("%s has no unit or no spelling", m)
		}
	}
	for _, name := range schemaOrder {
		if schema[name] == nil {
			t.Errorf("schemaOrder has %q, schema has not", name)
		}
	}
}

func ExampleParseProduct() {
	_, err := ParseProduct("product.yaml", []byte(`
product: MP-N24
wafer: {diameter_mm: 100, edge_exclusion_mm: 60}
tests:
  - {name: BVCEO, measures: bvceo, unit: nA, lower: 22.5}
  - {name: HFE1, measures: hef, lower: 250, upper: 70}
`))
	fmt.Println(err)
	// Output:
	// product.yaml: wafer.edge_exclusion_mm: 60 leaves nothing of a radius of 50; write a width in millimetres such as 3
	// product.yaml: tests[0].unit: bvceo is measured in volts, not in nA; give a unit of volts, or mend measures
	// product.yaml: tests[1].measures: the text "hef" is not known; did you mean hfe? Known are bvceo, bvcbo, bvebo, bvces, icbo, iceo, iebo, hfe, vcesat, vbesat, rb, rc, rpinch, cob, ft
	// product.yaml: tests[1].upper: HFE1: upper 70 is below lower 250; swap them, or mend the one that is wrong
}

func ExampleParseConditions() {
	list, err := ParseConditions("IC=10uA, VCE=5V")
	fmt.Println(len(list), list[0].Name, list[0].Value, list[1].Name, list[1].Value, err)
	// Output: 2 IC 1e-05 VCE 5 <nil>
}
