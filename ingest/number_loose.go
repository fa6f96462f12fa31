package ingest

import (
	"math"
	"regexp"
	"strings"

	"kneepoint/config"
)

// grouped matches numbers with thousands apart, as people write them; the ones
// whose single comma or point could part a fraction instead are not among them.
var grouped = regexp.MustCompile(`^[+-]?(?:[0-9]{1,3}(?:[ ’'\x{a0}\x{202f}][0-9]{3})+(?:[.,][0-9]+)?` +
	`|[0-9]{1,3}(?:,[0-9]{3})+\.[0-9]+|[0-9]{1,3}(?:\.[0-9]{3})+,[0-9]+` +
	`|[0-9]{1,3}(?:,[0-9]{3}){2,}|[0-9]{1,3}(?:\.[0-9]{3}){2,})$`)

// parseGrouped reads "1,234.5", "1.120,5", "2 500", "1'000'000".
func parseGrouped(t string) (float64, bool) {
	if len(t) > 40 || !grouped.MatchString(t) {
		return 0, false
	}
	// The last of point and comma parts the fraction, unless it comes twice.
	decimal := strings.LastIndexAny(t, ".,")
	if decimal >= 0 && strings.Count(t, t[decimal:decimal+1]) > 1 {
		decimal = -1
	}
	var b []byte
	for i := range len(t) {
		switch c := t[i]; {
		case i == decimal:
			b = append(b, '.')
		case c-'0' <= 9 || c == '-':
			b = append(b, c)
		}
	}
	v, st := convert(b, '.')
	return v, st == cellNumber
}

// oneComma matches what may be thousands or a fraction; a zero in front would be
// no thousands.
var oneComma = regexp.MustCompile(`^[+-]?[1-9][0-9]{0,2},[0-9]{3}$`)

// thousands reads "2,500" where commas part the columns, so that whoever wrote the
// file put it between quotes: with points for fractions, it is two thousand five
// hundred. (In a file with another separator a comma parts the fraction.)
func (l *layout) thousands(t string) (float64, bool) {
	if l.sep != ',' || l.decimal != '.' || !oneComma.MatchString(t) {
		return 0, false
	}
	v, st := convert([]byte(strings.ReplaceAll(t, ",", "")), '.')
	return v, st == cellNumber
}

// splitQuantity parts "1.2 nA" into number and unit; ok is false where there is
// no number in front. The text of the unit may be empty.
func splitQuantity(t string, decimal byte) (v float64, unit string, ok bool) {
	if len(t) > 40 {
		return 0, "", false
	}
	for i := len(t); i > 0; i-- {
		head := strings.TrimSpace(t[:i])
		v, ok := 0.0, false
		if isDecimal([]byte(head), decimal) {
			var st status
			v, st = convert([]byte(head), decimal)
			ok = st == cellNumber
		} else {
			v, ok = parseGrouped(head)
		}
		if ok {
			return v, strings.TrimSpace(t[i:]), true
		}
	}
	return 0, "", false
}

// otherDecimal reads a number whose fraction is parted by the other sign than
// the file's: "5,0". With three digits after it, it could be thousands.
func otherDecimal(t string, decimal byte) (float64, bool) {
	other := byte(',')
	if decimal == ',' {
		other = '.'
	}
	i := strings.IndexByte(t, other)
	if i < 0 || len(t)-i-1 == 3 || !isDecimal([]byte(t), other) {
		return 0, false
	}
	v, st := convert([]byte(t), other)
	return v, st == cellNumber
}

// limitText is a limit as read from its cell; value NaN: none.
type limitText struct {
	value float64
	unit  config.Unit // when the cell gives one
}

// parseLimit reads the cell of a limit: a number; with a unit behind it; with a
// comparison sign that fits (an upper limit may say "<5"); with thousands. Words
// for nothing, and infinity, are no limit. ok is false for everything else.
func parseLimit(text string, decimal byte, upper bool) (l limitText, ok bool) {
	none := limitText{value: math.NaN()}
	text = strings.TrimSpace(text)
	sign, rest := cutComparison([]byte(text))
	if sign > 0 && upper || sign < 0 && !upper {
		return none, false
	}
	v, st := parseNumber(rest, decimal)
	switch st {
	case cellEmpty:
		return none, sign == 0
	case cellMissing, cellOver, cellUnder:
		return none, true
	case cellNumber:
		l.value = v
	default:
		t, unit, ok := string(rest), "", false
		if l.value, ok = otherDecimal(t, decimal); !ok {
			if l.value, unit, ok = splitQuantity(t, decimal); !ok {
				return none, false
			}
		}
		if unit != "" {
			u, err := config.ParseUnit(unit)
			if err != nil {
				return none, false
			}
			l.unit = u
		}
	}
	if math.Abs(l.value) >= 1e30 {
		return none, true
	}
	return l, true
}

// in gives the limit in a unit; ok is false when it does not convert.
func (l limitText) in(u config.Unit) (float64, bool) {
	switch {
	case !l.unit.Given() || l.value != l.value:
		return l.value, true
	case !u.Given() || !u.Compatible(l.unit):
		return math.NaN(), false
	}
	return convertUnit(l.value, l.unit, u), true
}
