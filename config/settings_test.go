package config

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"
	"github.com/spf13/cobra"
	"github.com/spf13/viper"
)

// bound is a viper with flags bound as a command binds them.
func bound(t *testing.T, args ...string) *viper.Viper {
	t.Helper()
	v, flags := viper.New(), (&cobra.Command{}).Flags()
	flags.Int("workers", 0, "")
	flags.String("retest", "last", "")
	flags.Bool("count-edge-dice", true, "")
	flags.Float64("marginal-percent", 10, "")
	if err := flags.Parse(args); err != nil {
		t.Fatal(err)
	}
	for _, name := range []string{"workers", "retest", "count-edge-dice", "marginal-percent"} {
		if err := v.BindPFlag(strings.ReplaceAll(name, "-", "_"), flags.Lookup(name)); err != nil {
			t.Fatal(err)
		}
	}
	return v
}

func settingsFile(t *testing.T, name, text string) string {
	t.Helper()
	path := filepath.Join(t.TempDir(), name)
	if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return path
}

func TestDefaultSettings(t *testing.T) {
	want := Settings{0, "last", true, 10, 10, 25, 5, 8, 0.95}
	if got := DefaultSettings(); got != want {
		t.Errorf("%+v", got)
	}
	for _, v := range []*viper.Viper{viper.New(), bound(t)} {
		if got, err := LoadSettings(v, ""); err != nil || got != want {
			t.Errorf("%+v, %v", got, err)
		}
	}
}

// Flags over environment over file over defaults.
func TestLoadSettingsPrecedence(t *testing.T) {
	path := settingsFile(t, "s.yaml", "workers: 2\nretest: first\ncount_edge_dice: false\nrings: 7\nMinimum_N: 30\n")
	t.Setenv("KNEEPOINT_RETEST", "Best")
	t.Setenv("KNEEPOINT_WORKERS", "3")
	t.Setenv("KNEEPOINT_MARGINAL_PERCENT", "7.5")
	t.Setenv("KNEEPOINT_SECTORS", "") // empty is not set
	t.Setenv("KNEEPOINT_LONG", "1")   // not a setting, and like none
	got, err := LoadSettings(bound(t, "--workers=4"), path)
	want := Settings{Workers: 4, Retest: RetestBest, CountEdgeDice: false, MarginalPercent: 7.5, LimitShiftPercent: 10,
		MinimumN: 30, Rings: 7, Sectors: 8, Confidence: 0.95}
	if diff := cmp.Diff(want, got); err != nil || diff != "" {
		t.Errorf("%v\n%s", err, diff)
	}
	for name, text := range map[string]string{
		"s.toml": "workers = 4\nretest = \"best\"\ncount_edge_dice = false\nmarginal_percent = 7.5\nrings = 7\nminimum_n = 30\n",
		"s.json": `{"workers": 4, "retest": "best", "count_edge_dice": false, "marginal_percent": 7.5, "rings": 7, "minimum_n": 30, "confidence": 0.95}`,
	} {
		os.Unsetenv("KNEEPOINT_RETEST")
		os.Unsetenv("KNEEPOINT_WORKERS")
		os.Unsetenv("KNEEPOINT_MARGINAL_PERCENT")
		if got, err := LoadSettings(viper.New(), settingsFile(t, name, text)); err != nil || got != want {
			t.Errorf("%s: %+v, %v", name, got, err)
		}
	}
}

func TestLoadSettingsProblems(t *testing.T) {
	for name, c := range map[string]struct {
		text string
		env  string
		args []string
		want []string
	}{
		"word":            {text: "retest: lst", want: []string{`retest: the text "lst" is not known; write last, first or best; without it last holds`}},
		"number as word":  {text: "retest: 1", want: []string{"retest: the number 1 is not known; write last"}},
		"misspelt":        {text: "sector: 8", want: []string{"sector: unknown setting; did you mean sectors?"}},
		"unknown":         {text: "colour: red", want: []string{"colour: unknown setting; known are workers"}},
		"twice":           {text: "rings: 5\nRings: 6", want: []string{"rings: the key stands twice"}},
		"negative":        {text: "workers: -1", want: []string{"workers: -1 is out of range; write a whole number from 0 to 1024"}},
		"half":            {text: "rings: 2.5", want: []string{"rings: 2.5 is out of range"}},
		"quoted":          {text: "rings: '5'", want: []string{`rings: the text "5" stands where a number belongs`}},
		"list":            {text: "rings: [5]", want: []string{"rings: a list stands where a number belongs"}},
		"zero percent":    {text: "marginal_percent: 0", want: []string{"marginal_percent: 0 is out of range; write a percentage"}},
		"whole percent":   {text: "limit_shift_percent: 100", want: []string{"limit_shift_percent: 100 is out of range"}},
		"percent text":    {text: "limit_shift_percent: 10%", want: []string{`limit_shift_percent: the text "10%" stands where`}},
		"nan":             {text: "minimum_n: .nan", want: []string{"minimum_n: NaN is out of range"}},
		"flag":            {text: "count_edge_dice: 2", want: []string{"count_edge_dice: the number 2 stands where true or false belongs"}},
		"confidence":      {text: "confidence: 0.9", want: []string{"confidence: the number 0.9 is set, but it is fixed at 0.95"}},
		"environment":     {env: "KNEEPOINT_WORKERS=abc", want: []string{`KNEEPOINT_WORKERS: the text "abc" stands where a number belongs`}},
		"misspelt in it":  {env: "KNEEPOINT_RETESST=last", want: []string{"KNEEPOINT_RETESST: unknown environment variable; did you mean KNEEPOINT_RETEST?"}},
		"flag of command": {args: []string{"--workers=5000"}, want: []string{"--workers: 5000 is out of range"}},
		"all at once": {text: "rings: 0\nsectors: 100\nretest: no\nz: 1", env: "KNEEPOINT_MINIMUM_N=1", args: []string{"--marginal-percent=60"},
			want: []string{"z: ", "retest: ", "--marginal-percent: 60", "KNEEPOINT_MINIMUM_N: 1 is out of range", "rings: 0", "sectors: 100"}},
	} {
		t.Run(name, func(t *testing.T) {
			path, file := "", "settings"
			if c.text != "" {
				path = settingsFile(t, "s.yaml", c.text)
				file = path
			}
			if key, value, ok := strings.Cut(c.env, "="); ok {
				t.Setenv(key, value)
			}
			got, err := LoadSettings(bound(t, c.args...), path)
			var p *Problems
			if !errors.As(err, &p) || got != DefaultSettings() {
				t.Fatalf("%+v, %v", got, err)
			}
			lines := strings.Split(err.Error(), "\n")
			if len(lines) != len(c.want) {
				t.Fatalf("%d problems, want %d:\n%s", len(lines), len(c.want), err)
			}
			for i, want := range c.want {
				if !strings.HasPrefix(lines[i], file+": "+want) || !strings.Contains(lines[i], "; ") {
					t.Errorf("\n got %s\nwant %s", lines[i], want)
				}
			}
		})
	}
	for name, text := range map[string]string{"s.yaml": "rings: [", "s.toml": "rings", "s.json": "", "s.ini": "rings=5"} {
		path := settingsFile(t, name, text)
		var fe *FileError
		if _, err := LoadSettings(viper.New(), path); !errors.As(err, &fe) || !strings.HasPrefix(err.Error(), path) {
			t.Errorf("%s: %v", name, err)
		}
	}
	if _, err := LoadSettings(viper.New(), "none.yaml"); !errors.Is(err, os.ErrNotExist) || !strings.Contains(err.Error(), "check the path of the settings file") {
		t.Error(err)
	}
}
