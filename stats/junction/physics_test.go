package junction

import (
	"encoding/json"
	"math"
	"os"
	"path/filepath"
	"sort"
	"testing"
)

// physicsTable is one table of the reference folder: JSON beside PHYSICS.md, made
// outside the project (see its page, section 7, for what is confirmed).
type physicsTable struct {
	Table   string
	Rows    []map[string]any
	Devices json.RawMessage
	Causes  map[string]map[string]float64
	Limit   map[string]float64 `json:"cylinder_limit"`
	folder  string
}

// tally counts the checks of a table, so that a run says what it covered.
type tally struct {
	t            *testing.T
	rows, failed int
	worst        map[string]float64 // of the tolerance, by column
}

func (c *tally) row(fn func() bool) {
	c.rows++
	if !fn() {
		c.failed++
	}
}

// near checks got against want within tol (relative, or absolute where abs) and
// remembers the worst share of the tolerance that a column used.
func (c *tally) near(where, column string, got, want, tol float64, abs bool) bool {
	d := math.Abs(got - want)
	if !abs {
		d /= math.Abs(want)
	}
	// The tables are printed to six digits.
	share := math.Max(0, d-2e-6*math.Abs(want)) / tol
	if !abs {
		share = math.Max(0, d-2e-6) / tol
	}
	if c.worst == nil {
		c.worst = map[string]float64{}
	}
	if !(c.worst[column] >= share) {
		c.worst[column] = share
	}
	if !(share <= 1) {
		c.t.Errorf("%s: %s is %.6g, the table says %.6g (tolerance %g)", where, column, got, want, tol)
		return false
	}
	return true
}

var tableChecks = map[string]func(*tally, *physicsTable){
	"ionisation_coefficients":       checkIonisation,
	"plane_breakdown":               checkPlane,
	"punch_through_breakdown":       checkPunchThrough,
	"curvature_breakdown":           checkCurvature,
	"bvceo":                         checkBVceo,
	"resistivity_n_type_phosphorus": checkResistivity,
	"published_checks":              checkPublished,
	"corner_rounding":               checkCorners,
	"jacobian":                      checkJacobian,
	"signatures":                    checkSignatures,
	"trade_facts":                   checkTrade,
}

// TestPhysicsTables holds the model against every table of a folder: the copy in
// testdata/physics, or the folder that KNEEPOINT_PHYSICS names. A table it does not
// know fails, as does a row it cannot check.
func TestPhysicsTables(t *testing.T) {
	folder := os.Getenv("KNEEPOINT_PHYSICS")
	if folder == "" {
		folder = "../../testdata/physics"
	}
	files, err := filepath.Glob(filepath.Join(folder, "*.json"))
	if err != nil || len(files) == 0 {
		t.Fatalf("no tables in %s (%v)", folder, err)
	}
	for _, file := range files {
		t.Run(filepath.Base(file), func(t *testing.T) {
			raw, err := os.ReadFile(file)
			if err != nil {
				t.Fatal(err)
			}
			tab := physicsTable{folder: folder}
			if err := json.Unmarshal(raw, &tab); err != nil {
				t.Fatal(err)
			}
			check := tableChecks[tab.Table]
			if check == nil {
				t.Fatalf("unknown table %q: teach TestPhysicsTables to check it", tab.Table)
			}
			c := &tally{t: t}
			check(c, &tab)
			if c.rows == 0 {
				t.Errorf("table %s: nothing was checked", tab.Table)
			}
			t.Logf("%s: %d of %d rows within tolerance", tab.Table, c.rows-c.failed, c.rows)
			var names []string
			for n := range c.worst {
				names = append(names, n)
			}
			sort.Strings(names)
			for _, n := range names {
				t.Logf("  %-24s worst %.2g of its tolerance", n, c.worst[n])
			}
		})
	}
}

// number reads a row's number; NaN when the row has none.
func number(row map[string]any, key string) float64 {
	if v, ok := row[key].(float64); ok {
		return v
	}
	return math.NaN()
}
