package main

import (
	"fmt"
	"sort"
	"strings"

	"kneepoint/reports/text"
)

// counted writes a number with its noun: 1 die, 1,234 dice.
func counted(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return text.Thousands(n) + " " + many
}

func size(bytes int64) string {
	for _, u := range []struct {
		unit string
		one  float64
	}{{"GB", 1e9}, {"MB", 1e6}, {"kB", 1e3}} {
		if v := float64(bytes) / u.one; v >= 1 {
			return fmt.Sprintf("%.3g %s", v, u.unit)
		}
	}
	return fmt.Sprintf("%d bytes", bytes)
}

// shortList joins names, the first ones when there are too many.
func shortList(names []string, most int) string {
	if len(names) <= most {
		return strings.Join(names, ", ")
	}
	return strings.Join(names[:most], ", ") + fmt.Sprintf(" and %d more", len(names)-most)
}

func sortedKeys[V any](m map[string]V) []string {
	keys := make([]string, 0, len(m))
	for k := range m {
		keys = append(keys, k)
	}
	sort.Strings(keys)
	return keys
}

func orNone(s string) string {
	if s == "" {
		return "without a name"
	}
	return s
}

func orDash(s string) string {
	if s == "" {
		return "-"
	}
	return text.Printable(s)
}

func orZero(n int) string {
	if n == 0 {
		return "-"
	}
	return text.Thousands(n)
}
