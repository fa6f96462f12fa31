package page

import (
	"math"
	"regexp"
	"strconv"
	"strings"

	"kneepoint/reports"
)

// All numbers of the page are written here, so that a quantity looks the same
// wherever it stands. A number and its unit are kept together by a no-break
// space; what was not computed is "n/a", never 0.

const (
	notAvailable = "n/a"
	space        = "\u00a0" // no-break
)

// count writes a number of dice, grouped from 10,000 up.
func count(n int) string {
	s := strconv.Itoa(n)
	if n < 10000 {
		return s
	}
	var b strings.Builder
	for i, d := range s {
		if i > 0 && (len(s)-i)%3 == 0 {
			b.WriteByte(',')
		}
		b.WriteRune(d)
	}
	return b.String()
}

// plural writes a count with its noun.
func plural(n int, one, many string) string {
	if n == 1 {
		return count(n) + space + one
	}
	return count(n) + space + many
}

// percentDecimals is how many decimals a share needs: one, and more as it gets
// close to nothing or to everything, where one decimal would hide the
// difference that matters (99.97 % is not 100 %). Small shares keep two digits.
func percentDecimals(p float64) int {
	rest := 100 * math.Min(math.Abs(p), math.Abs(1-p))
	if p > 0.5 {
		rest *= 10
	}
	switch {
	case rest >= 0.995 || rest == 0:
		return 1
	case rest >= 0.0995:
		return 2
	case rest >= 0.00095:
		return 3
	}
	return 4
}

func fixed(v float64, decimals int) string {
	s := strconv.FormatFloat(v, 'f', decimals, 64)
	if strings.Trim(s, "-0.") == "" {
		s = strings.TrimPrefix(s, "-") // no negative zero
	}
	return s
}

// percent writes a share of 1 as a percentage.
func percent(p reports.Number) string {
	if !p.Valid() {
		return notAvailable
	}
	v := float64(p)
	switch {
	case v == 0:
		return "0" + space + "%"
	case v == 1:
		return "100" + space + "%"
	case v > 0 && v < 5e-7:
		return "<0.0001" + space + "%"
	}
	return fixed(100*v, percentDecimals(v)) + space + "%"
}

// chance writes a probability that was estimated: whole percents, and no
// certainty either way.
func chance(p reports.Number) string {
	switch {
	case !p.Valid():
		return notAvailable
	case p < 0.01:
		return "below 1" + space + "%"
	case p > 0.99:
		return "above 99" + space + "%"
	}
	return fixed(100*float64(p), 0) + space + "%"
}

// percentRange writes the ends of a share's interval with the decimals that
// the estimate has.
func percentRange(i reports.Interval) string {
	if !i.Lower.Valid() || !i.Upper.Valid() {
		return notAvailable
	}
	d := percentDecimals(float64(i.Estimate))
	if !i.Estimate.Valid() {
		d = percentDecimals(float64(i.Lower))
	}
	return fixed(100*float64(i.Lower), d) + " to " + fixed(100*float64(i.Upper), d) + space + "%"
}

// signedPercent writes a change with its sign.
func signedPercent(p reports.Number) string {
	if p > 0 {
		return "+" + percent(p)
	}
	if p < 0 {
		return "-" + percent(-p)
	}
	return percent(p)
}

// points writes a difference of two shares in percentage points, without sign.
func points(d float64) string {
	v := math.Abs(100 * d)
	if v != 0 && v < 0.95 {
		return fixed(v, 2) + space + "points"
	}
	return fixed(v, 1) + space + "points"
}

// significant writes v with n significant digits: plain between 1e-4 and 1e6,
// with an exponent elsewhere.
func significant(v float64, n int) string {
	if math.IsNaN(v) {
		return notAvailable
	}
	if math.IsInf(v, 0) {
		return strings.Replace(strings.TrimPrefix(strconv.FormatFloat(v, 'g', -1, 64), "+"), "Inf", "∞", 1)
	}
	if v == 0 {
		return "0"
	}
	e := exponent(v, n)
	if e < -4 || e >= 6 {
		return tidyExponent(strconv.FormatFloat(v, 'e', n-1, 64))
	}
	return fixed(v, max(0, n-1-e))
}

// exponent is the decimal exponent of v once rounded to n digits.
func exponent(v float64, n int) int {
	s := strconv.FormatFloat(v, 'e', n-1, 64)
	e, _ := strconv.Atoi(s[strings.IndexByte(s, 'e')+1:])
	return e
}

// tidyExponent turns 3.10e-09 into 3.1e-9.
func tidyExponent(s string) string {
	mantissa, power, _ := strings.Cut(s, "e")
	if strings.Contains(mantissa, ".") {
		mantissa = strings.TrimRight(strings.TrimRight(mantissa, "0"), ".")
	}
	e, _ := strconv.Atoi(power)
	return mantissa + "e" + strconv.Itoa(e)
}

// value writes a measured or computed quantity: four significant digits.
func value(v reports.Number) string {
	return significant(float64(v), 4)
}

// exact writes a number that somebody chose, such as a limit: as few digits as
// give it back, at most seven.
func exact(v reports.Number) string { return trimmed(v, 7) }

// trimmed writes at most n significant digits, and no zeros after them.
func trimmed(v reports.Number, n int) string {
	if !v.Valid() {
		return notAvailable
	}
	s := significant(float64(v), n)
	if strings.Contains(s, ".") && !strings.Contains(s, "e") {
		s = strings.TrimRight(strings.TrimRight(s, "0"), ".")
	}
	return s
}

// withUnit puts the unit behind a written number.
func withUnit(s, unit string) string {
	if unit == "" || s == notAvailable {
		return s
	}
	return s + space + unit
}

// ratio writes an index such as Cpk: two decimals.
func ratio(v reports.Number) string {
	if !v.Valid() {
		return notAvailable
	}
	return fixed(float64(v), 2)
}

func ratioRange(i reports.Interval) string {
	if !i.Lower.Valid() && !i.Upper.Valid() {
		return notAvailable
	}
	return ratio(i.Lower) + " to " + ratio(i.Upper)
}

func valueRange(i reports.Interval) string {
	if !i.Lower.Valid() && !i.Upper.Valid() {
		return notAvailable
	}
	return value(i.Lower) + " to " + value(i.Upper)
}

// score writes a standard score: one decimal.
func score(z reports.Number) string {
	if !z.Valid() {
		return notAvailable
	}
	return fixed(float64(z), 1)
}

// pValue writes a probability of chance: two digits, one below 0.001. A value
// that ran out of a float64's range is a bound.
func pValue(p reports.Number) string {
	v := float64(p)
	switch {
	case !p.Valid():
		return notAvailable
	case v == 0:
		return "<1e-300"
	case v < 0.001:
		return significant(v, 1)
	case v > 0.995:
		return "1"
	}
	return significant(v, 2)
}

// size writes a file size.
func size(n int64) string {
	switch {
	case n < 10_000:
		return strconv.FormatInt(n, 10) + space + "bytes"
	case n < 10_000_000:
		return fixed(float64(n)/1e3, 0) + space + "kB"
	}
	return fixed(float64(n)/1e6, 0) + space + "MB"
}

// plot rounds a number for drawing: six digits are more than a screen shows.
// What is not a number becomes nil, which a chart leaves out.
func plot(v reports.Number) any {
	if !v.Valid() {
		return nil
	}
	f, _ := strconv.ParseFloat(strconv.FormatFloat(float64(v), 'e', 5, 64), 64)
	return f
}

// list joins names as a sentence does.
func list(names []string) string {
	switch len(names) {
	case 0:
		return ""
	case 1:
		return names[0]
	}
	return strings.Join(names[:len(names)-1], ", ") + " and " + names[len(names)-1]
}

var onlyLower = regexp.MustCompile(`^[a-z]+(-[a-z]+)*[,;]?$`)

// sentence gives a text of the report a capital and a full stop.
func sentence(s string) string {
	s = strings.TrimSpace(s)
	if s == "" {
		return ""
	}
	if first, _, _ := strings.Cut(s, " "); onlyLower.MatchString(first) { // "hFE" and "03" stay as they are
		s = strings.ToUpper(s[:1]) + s[1:]
	}
	if !strings.ContainsAny(s[len(s)-1:], ".!?:") {
		s += "."
	}
	return s
}

// orWhy puts the reason behind what was not computed.
func orWhy(written, why string) string {
	if written == notAvailable && why != "" {
		return notAvailable + ": " + why
	}
	return written
}

// partsPerMillion writes expected parts per million; what no lot could ever show
// is not spelled out.
func partsPerMillion(v reports.Number) string {
	if v > 0 && v < 0.001 {
		return "<0.001"
	}
	return value(v)
}
