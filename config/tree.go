package config

import (
	"fmt"
	"math"
	"sort"
	"strconv"
	"strings"
	"time"
)

// date is a value that a decoder took for a date or a time of day.
type date string

// plain makes the trees of the three decoders alike: maps keyed by text, every
// number a float64. Keys that are one text but were two values (1 and "1" in
// YAML) are added to double.
func plain(v any, path string, double *[]string) any {
	switch v := v.(type) {
	case map[string]any:
		for k, x := range v {
			v[k] = plain(x, join(path, k), double)
		}
		return v
	case map[any]any:
		out := make(map[string]any, len(v))
		for k, x := range v {
			key := keyText(k)
			if _, ok := out[key]; ok {
				*double = append(*double, join(path, key))
				sort.Strings(*double)
			}
			out[key] = plain(x, join(path, key), double)
		}
		return out
	case []any:
		for i, x := range v {
			v[i] = plain(x, index(path, i), double)
		}
		return v
	case int:
		return float64(v)
	case int64:
		return float64(v)
	case uint64:
		return float64(v)
	case nil, bool, string, float64:
		return v
	case time.Time:
		if v.Equal(v.Truncate(24 * time.Hour)) {
			return date(v.Format(time.DateOnly))
		}
		return date(v.Format(time.RFC3339Nano))
	default: // the date and time types of TOML
		return date(fmt.Sprint(v))
	}
}

func keyText(k any) string {
	switch k := k.(type) {
	case string:
		return k
	case float64:
		return formatNumber(k)
	case time.Time:
		return k.Format(time.DateOnly)
	}
	return fmt.Sprint(k)
}

func join(path, key string) string {
	if q := strconv.Quote(key); strings.ContainsAny(key, " .[]") || len(q) != len(key)+2 || key == "" {
		key = q
	}
	if path == "" {
		return key
	}
	return path + "." + key
}

func index(path string, i int) string { return path + "[" + strconv.Itoa(i) + "]" }

// collector gathers problems while a file is taken apart.
type collector struct{ list []Problem }

func (c *collector) add(key, what, remedy string) {
	c.list = append(c.list, Problem{key, what, remedy})
}

// block is one map of the file, its keys checked against the schema.
type block struct {
	*collector
	path   string
	values map[string]any  // by schema key
	meant  map[string]bool // keys that a misspelt one probably meant
}

// block checks the keys of v, which stands at path, against schema[name].
// Keys are matched with their case, else without it. What is no map is a
// problem and reads as an empty block.
func (c *collector) block(path, name string, v any) *block {
	known := schema[name]
	b := &block{c, path, map[string]any{}, map[string]bool{}}
	m, ok := v.(map[string]any)
	if !ok {
		if v != nil {
			c.add(path, describe(v)+" stands where a block of keys belongs", "its keys are "+strings.Join(known, ", "))
		}
		return b
	}
	from := map[string]string{}
	for _, k := range sortedKeys(m) {
		key := matchKey(k, known)
		switch {
		case key == "":
			b.unknown(k, name)
		case from[key] != "":
			c.add(join(path, k), "the key stands twice, as "+from[key]+" too", "keep one of them")
		default:
			from[key] = k
			b.values[key] = m[k]
		}
	}
	return b
}

func matchKey(k string, known []string) string {
	for _, want := range known {
		if k == want {
			return want
		}
	}
	for _, want := range known {
		if strings.EqualFold(k, want) {
			return want
		}
	}
	return ""
}

// unknown reports a key that the block has not, with what was probably meant.
func (b *block) unknown(k, name string) {
	path := join(b.path, k)
	if len(b.collector.list) > 100*maxProblemLines { // no product file; the search takes time
		b.add(path, "unknown key", "take it out")
		return
	}
	if near := nearest(k, schema[name]); near != "" {
		b.meant[near] = true
		b.add(path, "unknown key", "did you mean "+near+"?")
		return
	}
	for _, other := range schemaOrder {
		if matchKey(k, schema[other]) != "" && other != name {
			place := "belongs under " + other
			if other == "" {
				place = "belongs at the top of the file"
			}
			b.add(path, "unknown key", matchKey(k, schema[other])+" "+place)
			return
		}
	}
	b.add(path, "unknown key", "keys known here are "+strings.Join(schema[name], ", "))
}

// has reports whether the key is there with a value.
func (b *block) has(key string) bool { return b.values[key] != nil }

// missing reports an absent key that must be there, unless a misspelt one is
// blamed already.
func (b *block) missing(key, remedy string) {
	if !b.has(key) && !b.meant[key] {
		b.add(join(b.path, key), "missing", remedy)
	}
}

// number returns a finite number, NaN when there is none.
func (b *block) number(key, example string) float64 {
	return b.numberAt(join(b.path, key), b.values[key], example)
}

func (c *collector) numberAt(path string, v any, example string) float64 {
	switch v := v.(type) {
	case nil:
		return math.NaN()
	case float64:
		if math.IsNaN(v) || math.IsInf(v, 0) {
			c.add(path, formatNumber(v)+" is no finite number", "write a number such as "+example+", or leave the key out")
			return math.NaN()
		}
		return v
	case string:
		if f, err := strconv.ParseFloat(strings.TrimSpace(v), 64); err == nil && !math.IsInf(f, 0) && !math.IsNaN(f) {
			c.add(path, describe(v)+" stands where a number belongs", "take the quotes away: "+formatNumber(f))
			return math.NaN()
		}
	}
	c.add(path, describe(v)+" stands where a number belongs", "write a number such as "+example)
	return math.NaN()
}

// positive returns a number above zero, NaN when there is none.
func (b *block) positive(key, example string) float64 {
	v := b.number(key, example)
	if v <= 0 {
		b.add(join(b.path, key), formatNumber(v)+" is not above zero", "write a number such as "+example)
		return math.NaN()
	}
	return v
}

// whole returns an integer of at least low; 0 when there is none.
func (b *block) whole(key string, low int, example string) int {
	v := b.number(key, example)
	if math.IsNaN(v) {
		return 0
	}
	n, ok := wholeNumber(v)
	if !ok || n < low {
		b.add(join(b.path, key), fmt.Sprintf("%s is no whole number of at least %d", formatNumber(v), low), "write a number such as "+example)
		return 0
	}
	return n
}

func wholeNumber(v float64) (int, bool) {
	return int(v), v == math.Trunc(v) && math.Abs(v) <= math.MaxInt32
}

// text returns a text that is not blank, "" when there is none.
func (b *block) text(key, example string) string {
	return b.textAt(join(b.path, key), b.values[key], example)
}

func (c *collector) textAt(path string, v any, example string) string {
	switch v := v.(type) {
	case nil:
		return ""
	case string:
		if s := strings.TrimSpace(v); s != "" {
			return s
		}
		c.add(path, "the text is blank", "write a text such as "+example+", or leave the key out")
		return ""
	case float64, bool, date:
		c.add(path, describe(v)+" stands where text belongs", "put it in quotes to make it text")
		return ""
	}
	c.add(path, describe(v)+" stands where text belongs", "write a text such as "+example)
	return ""
}

// word returns one of the given words, "" when there is none.
func (b *block) word(key string, words ...string) string {
	s := b.text(key, words[0])
	if s == "" {
		return ""
	}
	if w := matchKey(s, words); w != "" {
		return w
	}
	remedy := "write " + strings.Join(words[:len(words)-1], ", ") + " or " + words[len(words)-1]
	if near := nearest(s, words); near != "" {
		remedy = "did you mean " + near + "? Known are " + strings.Join(words, ", ")
	}
	b.add(join(b.path, key), fmt.Sprintf("%s is not known", describe(s)), remedy)
	return ""
}

func (b *block) flag(key string) bool {
	switch v := b.values[key].(type) {
	case nil:
		return false
	case bool:
		return v
	default:
		b.add(join(b.path, key), describe(v)+" stands where true or false belongs", "write true or false")
		return false
	}
}

// list returns the elements of a list, nil when there is none.
func (b *block) list(key, remedy string) []any {
	switch v := b.values[key].(type) {
	case nil:
		return nil
	case []any:
		return v
	default:
		b.add(join(b.path, key), describe(v)+" stands where a list belongs", remedy)
		return nil
	}
}

// describe names a value in a message; texts are quoted and cut short.
func describe(v any) string {
	switch v := v.(type) {
	case nil:
		return "nothing"
	case string:
		if r := []rune(v); len(r) > 60 {
			v = string(r[:57]) + "..."
		}
		return "the text " + strconv.Quote(v)
	case float64:
		return "the number " + formatNumber(v)
	case bool:
		return strconv.FormatBool(v)
	case date:
		return "the date " + string(v)
	case []any:
		return "a list"
	}
	return "a block of keys"
}

func formatNumber(v float64) string { return strconv.FormatFloat(v, 'g', -1, 64) }

func sortedKeys[V any](m map[string]V) []string {
	out := make([]string, 0, len(m))
	for k := range m {
		out = append(out, k)
	}
	sort.Strings(out)
	return out
}
