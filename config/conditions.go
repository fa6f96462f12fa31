package config

import (
	"fmt"
	"math"
	"strconv"
	"strings"
)

// ParseConditions reads bias conditions such as "IC=10uA, VCE=5V" or
// "VCB=10V; F=1MHz": NAME=value unit, separated by commas or semicolons. A
// value without a unit is a ratio. Condition values are SI: IC=10uA has Value
// 1e-5 and Unit uA. An empty text has no conditions.
//
// The error names the first thing that is wrong and the character (counted
// from 1) where it stands. A name may not stand twice.
func ParseConditions(text string) ([]Condition, error) {
	if strings.TrimSpace(text) == "" {
		return nil, nil
	}
	var out []Condition
	for start := 0; start <= len(text); {
		end := start + strings.IndexAny(text[start:], ",;")
		if end < start {
			end = len(text)
		}
		c, at, err := parseCondition(text[start:end])
		if err == nil {
			for _, earlier := range out {
				if strings.EqualFold(earlier.Name, c.Name) {
					err = fmt.Errorf("%s stands twice; keep one", c.Name)
				}
			}
		}
		if err != nil {
			column := len([]rune(text[:start+at])) + 1
			return nil, fmt.Errorf("condition %q, character %d: %w", text, column, err)
		}
		out = append(out, c)
		start = end + 1
	}
	return out, nil
}

// parseCondition reads one NAME=value unit; at is the byte where an error stands,
// or the name when there is none.
func parseCondition(item string) (c Condition, at int, err error) {
	lead := len(item) - len(strings.TrimLeft(item, " \t"))
	if strings.TrimSpace(item) == "" {
		return c, lead, fmt.Errorf("nothing stands here; write NAME=value unit, or take the separator out")
	}
	name, rest, ok := strings.Cut(item, "=")
	name = strings.TrimSpace(name)
	if !ok {
		if numberLength(name) > 0 {
			return c, lead, fmt.Errorf("%q has no name before it; write NAME=value unit with a decimal point", name)
		}
		return c, lead, fmt.Errorf("%q has no '='; write NAME=value unit, as in IC=10uA", name)
	}
	if !conditionName(name) {
		return c, lead, fmt.Errorf("%q is no name; begin with a letter, as in VCE=5V", name)
	}
	at = len(item) - len(rest)
	at += len(rest) - len(strings.TrimLeft(rest, " \t"))
	rest = strings.TrimSpace(rest)
	n := numberLength(rest)
	if n == 0 {
		return c, at, fmt.Errorf("%s has no number; write NAME=value unit, as in %s=5V", name, name)
	}
	v, err := strconv.ParseFloat(rest[:n], 64)
	if err != nil || math.IsInf(v, 0) {
		return c, at, fmt.Errorf("%s is too large a number", rest[:n])
	}
	u, err := ParseUnit(rest[n:])
	if err != nil {
		return c, at + n, err
	}
	return Condition{Name: name, Value: u.ToSI(v), Unit: u}, lead, nil
}

// numberLength returns how many bytes at the start of s are a decimal number:
// sign, digits with a point, and an exponent where digits follow its e.
func numberLength(s string) int {
	i, digits := 0, 0
	if i < len(s) && (s[i] == '+' || s[i] == '-') {
		i++
	}
	for point := false; i < len(s) && (isDigit(s[i]) || s[i] == '.' && !point); i++ {
		if s[i] == '.' {
			point = true
		} else {
			digits++
		}
	}
	if digits == 0 {
		return 0
	}
	if i < len(s) && (s[i] == 'e' || s[i] == 'E') {
		j := i + 1
		if j < len(s) && (s[j] == '+' || s[j] == '-') {
			j++
		}
		if k := j; k < len(s) && isDigit(s[k]) {
			for k < len(s) && isDigit(s[k]) {
				k++
			}
			i = k
		}
	}
	return i
}

func isDigit(b byte) bool { return '0' <= b && b <= '9' }

func conditionName(s string) bool {
	for i, r := range s {
		letter := 'a' <= r && r <= 'z' || 'A' <= r && r <= 'Z'
		if !letter && (i == 0 || !strings.ContainsRune("0123456789_()./-", r)) {
			return false
		}
	}
	return s != ""
}

// FormatConditions writes conditions in the form that ParseConditions reads,
// each value in its own unit.
func FormatConditions(list []Condition) string {
	parts := make([]string, len(list))
	for i, c := range list {
		unit := c.Unit.Text
		if c.Unit.Base == "ratio" && c.Unit.Exp == 0 {
			unit = "" // it may be written as 1, which must not join the digits
		}
		parts[i] = c.Name + "=" + strconv.FormatFloat(c.Unit.FromSI(c.Value), 'g', -1, 64) + unit
	}
	return strings.Join(parts, ", ")
}
