package causes

import (
	"bytes"
	_ "embed"
	"fmt"
	"math"
	"slices"
	"strings"

	"go.yaml.in/yaml/v3"

	"kneepoint/stats/junction"
)

//go:embed catalogue.yaml
var builtin []byte

// Catalogue is what is known of causes before any lot is seen.
type Catalogue struct {
	Classes []Class
	Flags   []Flag
	Causes  []Entry

	WithinBaseline Odds `yaml:"within-baseline"`
	Unexplained    Odds
	Pairs          Odds
}

// Odds are prior odds against the others.
type Odds struct{ Odds float64 }

// Class is a kind of die that stands alone.
type Class struct {
	Class   string
	Text    string
	States  map[string][states]float64
	Default *[states]float64 // of measures that States does not name; nil: usual
}

// Flag is one yes-or-no observation with its chance when its causes are absent.
type Flag struct {
	Flag, Text string
	Usual      float64
}

// Entry is one cause of the catalogue. See catalogue.yaml for its parts.
type Entry struct {
	Cause      string
	Text       string
	Directions []string // none, or the two of them
	Odds       float64
	Setup      bool // the tester's doing: may scale any one test
	Shifts     []Shift
	Levels     float64 // chance that it moves levels at all; 0: it does where it can
	Smooth     float64 // 0: not known
	Dice       map[string]float64
	OneClass   float64 `yaml:"one-class"`
	Maps       map[string]float64
	Flags      map[string]float64
	Checks     []Check
}

// Shift is one way in which a cause moves levels.
type Shift struct {
	Parameters map[string]float64
	Moves      map[string]float64
	From, To   float64
	Both       bool // either sign, without being a direction of the cause
}

// Check is a measurement outside of the lot's data that can confirm a cause.
type Check struct {
	Text    string
	Power   float64 // chance that it shows the cause when it is there
	Caution string  // acid, voltage, chemical or ""
}

// Default is the built-in catalogue.
func Default() *Catalogue {
	c, err := parse(builtin)
	if err != nil {
		panic("causes: catalogue.yaml: " + err.Error()) // the tests parse it
	}
	return c
}

func parse(data []byte) (*Catalogue, error) {
	var c Catalogue
	d := yaml.NewDecoder(bytes.NewReader(data))
	d.KnownFields(true)
	if err := d.Decode(&c); err != nil {
		return nil, err
	}
	for i := range c.Causes {
		if err := c.check(&c.Causes[i]); err != nil {
			return nil, err
		}
	}
	return &c, nil
}

// With returns the catalogue with a site's own causes added, each as the product
// file has it. An error names the cause and what is wrong.
func (c *Catalogue) With(site []map[string]any) (*Catalogue, error) {
	if len(site) == 0 {
		return c, nil
	}
	out := *c
	out.Causes = slices.Clone(c.Causes)
	for i, m := range site {
		text, err := yaml.Marshal(m)
		if err != nil {
			return nil, fmt.Errorf("causes[%d]: %w", i, err)
		}
		e := Entry{Odds: 1}
		d := yaml.NewDecoder(bytes.NewReader(text))
		d.KnownFields(true)
		if err := d.Decode(&e); err != nil {
			return nil, fmt.Errorf("causes[%d]: %s; see a cause of the built-in catalogue for the form", i, oneLine(err))
		}
		if err := c.check(&e); err != nil {
			return nil, fmt.Errorf("causes[%d]: %w", i, err)
		}
		if at := slices.IndexFunc(out.Causes, func(o Entry) bool { return o.Cause == e.Cause }); at >= 0 {
			out.Causes[at] = e
		} else {
			out.Causes = append(out.Causes, e)
		}
	}
	return &out, nil
}

func oneLine(err error) string {
	return strings.Join(strings.Fields(err.Error()), " ")
}

// check reports the first thing that is wrong with a cause.
func (c *Catalogue) check(e *Entry) error {
	switch {
	case e.Cause == "":
		return fmt.Errorf("a cause without a name: write cause: my-cause")
	case e.Cause == Nothing || e.Cause == Unknown:
		return fmt.Errorf("%s: the name is taken", e.Cause)
	case len(e.Directions) != 0 && len(e.Directions) != 2:
		return fmt.Errorf("%s: directions are none or two, not %d", e.Cause, len(e.Directions))
	case !(e.Odds > 0) || math.IsInf(e.Odds, 0):
		return fmt.Errorf("%s: odds %v must be above 0", e.Cause, e.Odds)
	case len(e.Shifts) == 0 && len(e.Dice) == 0 && len(e.Flags) == 0:
		return fmt.Errorf("%s: it shows nowhere: give shifts, dice or flags", e.Cause)
	}
	for _, s := range e.Shifts {
		if !(s.From > 0 && s.To > s.From) {
			return fmt.Errorf("%s: a shift needs 0 < from < to, not %v and %v", e.Cause, s.From, s.To)
		}
		for _, name := range sortedKeys(s.Parameters) {
			if _, ok := parameters[name]; !ok {
				return fmt.Errorf("%s: no parameter %q; there are %s", e.Cause, name, strings.Join(sortedKeys(parameters), ", "))
			}
		}
	}
	for _, name := range sortedKeys(e.Dice) {
		p := e.Dice[name]
		if !slices.ContainsFunc(c.Classes, func(k Class) bool { return k.Class == name }) {
			return fmt.Errorf("%s: no class of dice %q", e.Cause, name)
		}
		if !(p >= 0) {
			return fmt.Errorf("%s: chance %v of %s", e.Cause, p, name)
		}
	}
	if !(e.Levels >= 0 && e.Levels < 1) {
		return fmt.Errorf("%s: levels is a chance from 0 to below 1, not %v", e.Cause, e.Levels)
	}
	if !(e.Smooth >= 0 && e.Smooth < 1) {
		return fmt.Errorf("%s: smooth is a chance from 0 to below 1, not %v", e.Cause, e.Smooth)
	}
	if !(e.OneClass >= 0 && e.OneClass < 1) {
		return fmt.Errorf("%s: one-class is a chance from 0 to below 1, not %v", e.Cause, e.OneClass)
	}
	for _, name := range sortedKeys(e.Flags) {
		p := e.Flags[name]
		if !slices.ContainsFunc(c.Flags, func(f Flag) bool { return f.Flag == name }) {
			return fmt.Errorf("%s: no flag %q", e.Cause, name)
		}
		if !(p > 0 && p < 1) {
			return fmt.Errorf("%s: chance of %s must be between 0 and 1, not %v", e.Cause, name, p)
		}
	}
	for _, name := range sortedKeys(e.Maps) {
		p := e.Maps[name]
		if !slices.Contains(patterns, name) || !(p >= 0) {
			return fmt.Errorf("%s: no map pattern %q with weight %v", e.Cause, name, p)
		}
	}
	return nil
}

// The causes that are no entries.
const (
	Nothing = "within-baseline"
	Unknown = "unexplained"
)

// parameters are the device model's, by the names that catalogues use.
var parameters = map[string]junction.Param{
	"epi-thickness": junction.EpiThickness, "epi-doping": junction.EpiDoping, "base-dose": junction.BaseDose,
	"base-depth": junction.BaseDepth, "emitter-depth": junction.EmitterDepth, "up-diffusion": junction.UpDiffusion,
	"edge-radius": junction.EdgeRadius, "corner-radius": junction.MaskRadius, "oxide-charge": junction.OxideCharge,
	"lifetime": junction.Lifetime, "surface-velocity": junction.SurfaceVelocity, "emitter-gummel": junction.EmitterGummel,
	"series-resistance": junction.SeriesResistance, "modulation": junction.Modulation, "temperature": junction.Temperature,
}

// patterns are the kinds of map patterns, as wafermap.Signatures names them.
var patterns = []string{"edge-ring", "edge-arc", "centre", "annulus", "line", "blob", "gradient", "sector",
	"shot-repeat", "site", "stripe", "near-total", "random", "none"}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	slices.Sort(keys)
	return keys
}
