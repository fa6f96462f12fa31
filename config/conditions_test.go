package config

import (
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
)

func TestParseConditions(t *testing.T) {
	amp := func(text string, exp int) Unit { return Unit{text, "A", exp} }
	for text, want := range map[string][]Condition{
		"":                 nil,
		"  ":               nil,
		"IC=10uA, VCE=5V":  {{"IC", 1e-5, amp("uA", -6)}, {"VCE", 5, Unit{"V", "V", 0}}},
		"VCB=10V; F=1MHz":  {{"VCB", 10, Unit{"V", "V", 0}}, {"F", 1e6, Unit{"MHz", "Hz", 6}}},
		"RBE=10kohm":       {{"RBE", 1e4, Unit{"kohm", "ohm", 3}}},
		"RATIO=10":         {{"RATIO", 10, Unit{"", "ratio", 0}}},
		"IB=0":             {{"IB", 0, Unit{"", "ratio", 0}}},
		"V(CE) = -5.5 V":   {{"V(CE)", -5.5, Unit{"V", "V", 0}}},
		"IC=1e-3A":         {{"IC", 1e-3, amp("A", 0)}},
		"IC=1E3uA":         {{"IC", 1e-3, amp("uA", -6)}},
		"IC=+.5mA":         {{"IC", 5e-4, amp("mA", -3)}},
		"IC=1fA":           {{"IC", 1e-15, amp("fA", -15)}},
		"D=2%, tp=300us":   {{"D", 0.02, Unit{"%", "ratio", -2}}, {"tp", 3e-4, Unit{"us", "s", -6}}},
		"T=125degC,IC=1µA": {{"T", 125, Unit{"degC", "degC", 0}}, {"IC", 1e-6, amp("µA", -6)}},
	} {
		got, err := ParseConditions(text)
		if err != nil || !cmp.Equal(got, want) {
			t.Errorf("ParseConditions(%q): %v\n%s", text, err, cmp.Diff(want, got))
		}
	}
}

func TestParseConditionsErrors(t *testing.T) {
	for _, c := range []struct{ text, want string }{
		{"IC=0,5mA", `character 6: "5mA" has no name before it`},
		{"IC", "character 1: \"IC\" has no '='"},
		{"IC=10uA, VCE", "character 10: \"VCE\" has no '='"},
		{"IC=10xA", "character 6: unknown unit"},
		{"IC=µ, VCE=5V", "character 4: IC has no number"},
		{"IC=1µA, VCE=x", "character 13: VCE has no number"},
		{"IC=", "character 4: IC has no number"},
		{"=5V", "character 1: \"\" is no name"},
		{"2IC=5V", "character 1: \"2IC\" is no name"},
		{"IC=1mA,", "character 8: nothing stands here"},
		{"IC=1mA,,VCE=5V", "character 8: nothing stands here"},
		{"IC=1mA, ic=2mA", "character 9: ic stands twice"},
		{"IC=1e999A", "character 4: 1e999 is too large"},
		{"IC=inf", "has no number"},
		{"IC=nan", "has no number"},
		{"IC=0x10A", "unknown unit"},
		{"IC=1mS", "siemens"},
	} {
		if got, err := ParseConditions(c.text); err == nil || !strings.Contains(err.Error(), c.want) || got != nil {
			t.Errorf("ParseConditions(%q) = %v, %v; want %q", c.text, got, err, c.want)
		}
	}
}

func FuzzParseConditions(f *testing.F) {
	for _, s := range []string{"IC=10uA, VCE=5V", "F=1MHz", "RBE=10kohm", "X=2 1", "IC=0,5mA", "D=2%;T=25°C", "\xff=1"} {
		f.Add(s)
	}
	f.Fuzz(func(t *testing.T, s string) {
		list, err := ParseConditions(s)
		if err != nil {
			if list != nil || strings.ContainsAny(err.Error(), "\n\r") {
				t.Fatalf("ParseConditions(%q) = %v, %v", s, list, err)
			}
			return
		}
		// What is written from them reads as the same values in the same units.
		again, err := ParseConditions(FormatConditions(list))
		if err != nil || len(again) != len(list) {
			t.Fatalf("%q written as %q: %v", s, FormatConditions(list), err)
		}
		for i, c := range list {
			if a := again[i]; a.Name != c.Name || a.Value != c.Value || a.Unit.Base != c.Unit.Base || a.Unit.Exp != c.Unit.Exp {
				t.Fatalf("%+v written and read is %+v", c, a)
			}
		}
	})
}
