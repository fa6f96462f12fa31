package config

import (
	"fmt"
	"math"
	"os"
	"strconv"
	"strings"

	"github.com/spf13/viper"
)

// Confidence is the level of every interval in every report. It is no setting:
// intervals of two reports can be compared only when it is the same in both.
const Confidence = 0.95

// EnvPrefix begins the names of environment variables that give settings:
// KNEEPOINT_WORKERS for workers.
const EnvPrefix = "KNEEPOINT"

// RetestPolicy says which measurement of a retested die counts.
type RetestPolicy string

const (
	RetestLast  RetestPolicy = "last"  // the last valid one: what the die was sorted by
	RetestFirst RetestPolicy = "first" // the first valid one: what the process made
	RetestBest  RetestPolicy = "best"  // the best one: ships marginal parts, and a report says so
)

// Settings are what an installation may tune. They change how a lot is looked
// at, never what the product is: that is the product file's.
type Settings struct {
	Workers           int          // workers: goroutines for reading and computing; 0 all cores
	Retest            RetestPolicy // retest
	CountEdgeDice     bool         // count_edge_dice: dice in the edge exclusion count in yield
	MarginalPercent   float64      // marginal_percent: a fail this near to its limit is marginal
	LimitShiftPercent float64      // limit_shift_percent: how far either way a limit is moved for yield against it
	MinimumN          int          // minimum_n: fewest readings for a capability index
	Rings, Sectors    int          // rings, sectors: zones of a wafer
	Confidence        float64      // always 0.95
}

// DefaultSettings returns what holds when nothing is set. 25 readings as the
// least for a capability index is common practice, no source: its 95 % interval
// is then about 30 % either way (Cp's relative standard error is about
// 1/sqrt(2(n-1)), 14 % at 25).
func DefaultSettings() Settings {
	return Settings{
		Workers: 0, Retest: RetestLast, CountEdgeDice: true, MarginalPercent: 10, LimitShiftPercent: 10,
		MinimumN: 25, Rings: 5, Sectors: 8, Confidence: Confidence,
	}
}

// settingKeys lists the settings in the order in which they are checked.
var settingKeys = []string{"workers", "retest", "count_edge_dice", "marginal_percent", "limit_shift_percent",
	"minimum_n", "rings", "sectors"}

// LoadSettings reads the settings: from the file at path (YAML, TOML or JSON by
// its extension; "" for none), over it the environment (KNEEPOINT_RETEST=first),
// over that the command's flags. A command binds its flags to v beforehand, each
// to its key:
//
//	v.BindPFlag("retest", cmd.Flags().Lookup("retest"))
//
// Empty environment variables do not count. Errors are *[FileError] for a file
// that cannot be read and *[Problems] with everything that is wrong, wherever it
// was set; the Settings beside an error are the defaults.
func LoadSettings(v *viper.Viper, path string) (Settings, error) {
	s, file := DefaultSettings(), "settings"
	c := &collector{}
	fromFile := map[string]any{}
	if path != "" {
		file = path
		data, err := readFile(path, "settings")
		if err != nil {
			return s, err
		}
		root, double, err := decodeFile(path, data, "settings")
		if err != nil {
			return s, err
		}
		for _, key := range double {
			c.add(key, "the key stands twice, as a number and as text", "keep one of them")
		}
		fromFile = c.settingsBlock(root)
		if err := v.MergeConfigMap(copyMap(fromFile)); err != nil {
			return s, &FileError{File: path, What: oneLine(err.Error()), Remedy: "write a key a line, as in 'rings: 5'", Err: err}
		}
	}
	v.SetEnvPrefix(EnvPrefix)
	for _, key := range settingKeys {
		_ = v.BindEnv(key) // fails only without a key
	}
	c.misspeltEnvironment(os.Environ())
	r := settingReader{c, v, fromFile}

	s.Workers = r.whole("workers", s.Workers, 0, 1024)
	s.Retest = RetestPolicy(r.word("retest", string(s.Retest), "last", "first", "best"))
	s.CountEdgeDice = r.flag("count_edge_dice", s.CountEdgeDice)
	s.MarginalPercent = r.percent("marginal_percent", s.MarginalPercent)
	s.LimitShiftPercent = r.percent("limit_shift_percent", s.LimitShiftPercent)
	s.MinimumN = r.whole("minimum_n", s.MinimumN, 2, 1_000_000)
	s.Rings = r.whole("rings", s.Rings, 1, 50)
	s.Sectors = r.whole("sectors", s.Sectors, 1, 72)
	if len(c.list) > 0 {
		return DefaultSettings(), &Problems{file, c.list}
	}
	return s, nil
}

// settingsBlock checks a settings file's keys and returns its values by key.
func (c *collector) settingsBlock(root map[string]any) map[string]any {
	if k, v := "confidence", root["confidence"]; v != nil {
		if v != Confidence {
			c.add(k, describe(v)+" is set, but it is fixed at 0.95 so that reports can be compared", "take the key out")
		}
		delete(root, k)
	}
	out := map[string]any{}
	for _, k := range sortedKeys(root) {
		key := matchKey(k, settingKeys)
		if key == "" {
			c.add(join("", k), "unknown setting", suggest(k, settingKeys))
			continue
		}
		if _, ok := out[key]; ok {
			c.add(join("", k), "the key stands twice, in capital and small letters", "keep one of them")
			continue
		}
		if root[k] != nil {
			out[key] = root[k]
		}
	}
	return out
}

func copyMap(m map[string]any) map[string]any {
	out := make(map[string]any, len(m))
	for k, v := range m {
		out[k] = v
	}
	return out
}

func suggest(k string, known []string) string {
	if near := nearest(k, known); near != "" {
		return "did you mean " + near + "?"
	}
	return "known are " + strings.Join(known, ", ")
}

// misspeltEnvironment finds variables that are all but a setting's name.
// KNEEPOINT_ variables that are like none are left to whoever reads them.
func (c *collector) misspeltEnvironment(environment []string) {
	meant := map[string]string{}
	for _, pair := range environment {
		name, _, _ := strings.Cut(pair, "=")
		key, ok := strings.CutPrefix(name, EnvPrefix+"_")
		if !ok || matchKey(key, settingKeys) == strings.ToLower(key) && key == strings.ToUpper(key) {
			continue
		}
		for _, k := range settingKeys {
			if d := editDistance(strings.ToLower(key), k); d <= 2 && d <= len(k)/4 || strings.EqualFold(key, k) {
				meant[name] = EnvPrefix + "_" + strings.ToUpper(k)
				break
			}
		}
	}
	for _, name := range sortedKeys(meant) {
		c.add(name, "unknown environment variable", "did you mean "+meant[name]+"?")
	}
}

// settingReader takes single settings out of viper, strictly: viper's own casts
// make 0 of "abc" and 2 of 2.7.
type settingReader struct {
	c        *collector
	v        *viper.Viper
	fromFile map[string]any
}

// get returns a setting's value and where it was set, for messages. Nothing
// set gives nil.
func (r settingReader) get(key string) (value any, from string) {
	if !r.v.IsSet(key) {
		return nil, key
	}
	value = r.v.Get(key)
	env := EnvPrefix + "_" + strings.ToUpper(key)
	if text, ok := os.LookupEnv(env); ok && text != "" && value == text {
		return value, env
	}
	if x, ok := r.fromFile[key]; ok && same(x, value) {
		return value, key
	}
	return value, "--" + strings.ReplaceAll(key, "_", "-")
}

// same compares what may be lists or maps without a panic.
func same(a, b any) bool { return fmt.Sprint(a) == fmt.Sprint(b) }

// number takes numbers as they are and texts of the environment parsed; ok is
// false when nothing is set or a problem was added.
func (r settingReader) number(key, remedy string) (v float64, from string, ok bool) {
	value, from := r.get(key)
	switch x := value.(type) {
	case nil:
		return 0, from, false
	case int:
		v = float64(x)
	case float64:
		v = x
	case string:
		f, err := strconv.ParseFloat(strings.TrimSpace(x), 64)
		if err != nil || r.quoted(key, value) {
			r.c.add(from, describe(value)+" stands where a number belongs", remedy)
			return 0, from, false
		}
		v = f
	default:
		r.c.add(from, describe(value)+" stands where a number belongs", remedy)
		return 0, from, false
	}
	return v, from, true
}

// quoted reports whether a text comes from the file, where numbers need no quotes.
func (r settingReader) quoted(key string, value any) bool {
	x, ok := r.fromFile[key]
	return ok && x == value
}

func (r settingReader) whole(key string, preset, low, high int) int {
	remedy := fmt.Sprintf("write a whole number from %d to %d; without it %d holds", low, high, preset)
	v, from, ok := r.number(key, remedy)
	if !ok {
		return preset
	}
	if v != math.Trunc(v) || !(v >= float64(low) && v <= float64(high)) {
		r.c.add(from, formatNumber(v)+" is out of range", remedy)
		return preset
	}
	return int(v)
}

func (r settingReader) percent(key string, preset float64) float64 {
	remedy := "write a percentage above 0 and up to 50; without it " + formatNumber(preset) + " holds"
	v, from, ok := r.number(key, remedy)
	if !ok {
		return preset
	}
	if !(v > 0 && v <= 50) {
		r.c.add(from, formatNumber(v)+" is out of range", remedy)
		return preset
	}
	return v
}

func (r settingReader) word(key, preset string, words ...string) string {
	value, from := r.get(key)
	if value == nil {
		return preset
	}
	if s, ok := value.(string); ok {
		if w := matchKey(strings.TrimSpace(s), words); w != "" {
			return w
		}
	}
	r.c.add(from, describe(value)+" is not known", "write "+strings.Join(words[:len(words)-1], ", ")+" or "+words[len(words)-1]+"; without it "+preset+" holds")
	return preset
}

func (r settingReader) flag(key string, preset bool) bool {
	value, from := r.get(key)
	switch x := value.(type) {
	case nil:
		return preset
	case bool:
		return x
	case string:
		switch strings.ToLower(strings.TrimSpace(x)) {
		case "true", "1", "yes":
			return true
		case "false", "0", "no":
			return false
		}
	}
	r.c.add(from, describe(value)+" stands where true or false belongs", "write true or false; without it "+strconv.FormatBool(preset)+" holds")
	return preset
}
