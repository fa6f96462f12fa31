package config

import (
	"fmt"
	"strings"
	"unicode"
)

// ParseUnit reads a unit as files and testers print it.
//
// The SI spelling comes first and case counts in it: a prefix f p n u (µ, μ) m
// k M G on V, A, ohm (Ohm, Ω), F, s, Hz, m or W; mV is a millivolt and MV a
// megavolt. Beside them: cm; angstrom, Å (plain A is the ampere); degC, °C; a
// ratio written as nothing, 1, -, ratio, %, ppm, A/A or V/V; ohm/sq as ohm.
//
// What is not SI is read where only one reading makes sense:
//
//   - names of units in any case, singular or plural, with a prefix letter or
//     its name: volts, Amps, kOhms, mSec, MSEC (milli), microamps;
//   - all lower case: v, na, pf, khz; mhz is MHz, for nobody means millihertz;
//   - all capitals, as many testers print: NA, UA, PF, KHZ, MHZ, KOHM, MM. The
//     letter M is the doubtful one. MV, MA, MF, MW and MOHM are read as SI reads
//     them, as mega; see [ParseUnits] and [Unit.Capitals] for the other reading;
//   - K for k before a correctly written unit: KHz, KV.
//
// Refused, because each could be two things: S, mS, MS and the like (siemens in
// SI, seconds on some testers), and M, K or u alone. Surrounding blanks and one
// pair of brackets, as in "[nA]", do not count.
func ParseUnit(text string) (Unit, error) {
	s := plainUnit(text)
	u := Unit{Text: bareUnit(text)}
	if r, ok := otherUnits[strings.ToLower(s)]; ok {
		u.Base, u.Exp = r.Base, r.Exp
		return u, nil
	}
	for _, try := range []func(string) (string, int, bool){unitSI, unitWord, unitSloppy} {
		if base, exp, ok := try(s); ok {
			u.Base, u.Exp = base, exp
			return u, nil
		}
	}
	return Unit{}, unitError(u.Text, s)
}

// ParseUnits reads the units of one file together, which settles the letter M:
// where no unit has a lower-case letter and at least one is in capitals against
// the SI spelling (NA, UA, PF ...), the file's writer has capitals only, and
// MV, MA, MF, MW and MS are milli. MOHM and MHZ stay mega. Errors stand at the
// index of their text; nil where there is none.
func ParseUnits(texts []string) ([]Unit, []error) {
	units, errs := make([]Unit, len(texts)), make([]error, len(texts))
	capitals, lower := false, false
	for i, t := range texts {
		units[i], errs[i] = ParseUnit(t)
		s := plainUnit(t)
		lower = lower || strings.IndexFunc(s, unicode.IsLower) >= 0
		if errs[i] == nil && len(s) > 1 {
			if _, _, si := unitSI(s); !si && strings.IndexFunc(s, unicode.IsUpper) >= 0 {
				capitals = true
			}
		}
	}
	if !capitals || lower {
		return units, errs
	}
	for i := range units {
		if plainUnit(texts[i]) == "MS" {
			units[i], errs[i] = Unit{Text: bareUnit(texts[i]), Base: "s", Exp: -3}, nil
		} else if alt, ok := units[i].Capitals(); ok && alt.Base != "ohm" {
			units[i] = alt
		}
	}
	return units, errs
}

// Capitals returns what the unit means when its writer has capital letters
// only, where that differs from the SI reading: for MV the millivolt. ok is
// false for every other unit.
func (u Unit) Capitals() (alt Unit, ok bool) {
	s := plainUnit(u.Text)
	if u.Exp != 6 || !strings.HasPrefix(s, "M") || strings.ToUpper(s) != s || u.Base == "Hz" {
		return u, false
	}
	u.Exp = -3
	return u, true
}

type baseExp struct {
	Base string
	Exp  int
}

var unitPrefixes = map[string]int{"f": -15, "p": -12, "n": -9, "u": -6, "m": -3, "": 0, "k": 3, "M": 6, "G": 9}

var unitSymbols = map[string]string{"V": "V", "A": "A", "F": "F", "s": "s", "Hz": "Hz", "m": "m", "W": "W",
	"ohm": "ohm", "Ohm": "ohm"}

var prefixWords = map[string]int{"femto": -15, "pico": -12, "nano": -9, "micro": -6, "milli": -3,
	"kilo": 3, "mega": 6, "giga": 9, "": 0}

// unitWords are names, lower case; longest first where one ends another.
var unitWords = []struct{ word, base string }{
	{"volts", "V"}, {"volt", "V"}, {"amperes", "A"}, {"ampere", "A"}, {"amps", "A"}, {"amp", "A"},
	{"ohms", "ohm"}, {"ohm", "ohm"}, {"farads", "F"}, {"farad", "F"},
	{"seconds", "s"}, {"second", "s"}, {"secs", "s"}, {"sec", "s"}, {"hertz", "Hz"},
	{"metres", "m"}, {"metre", "m"}, {"meters", "m"}, {"meter", "m"}, {"watts", "W"}, {"watt", "W"},
}

// otherUnits stand alone and take no prefix; keys are lower case.
var otherUnits = map[string]baseExp{
	"": {"ratio", 0}, "1": {"ratio", 0}, "-": {"ratio", 0}, "ratio": {"ratio", 0}, "none": {"ratio", 0},
	"unitless": {"ratio", 0}, "a/a": {"ratio", 0}, "v/v": {"ratio", 0},
	"%": {"ratio", -2}, "percent": {"ratio", -2}, "pct": {"ratio", -2}, "ppm": {"ratio", -6},
	"angstrom": {"m", -10}, "angstroms": {"m", -10}, "å": {"m", -10},
	"cm": {"m", -2}, "micron": {"m", -6}, "microns": {"m", -6},
	"degc": {"degC", 0}, "°c": {"degC", 0}, "℃": {"degC", 0}, "c": {"degC", 0}, "celsius": {"degC", 0},
}

// bareUnit takes off the blanks and brackets around a unit.
func bareUnit(text string) string {
	s := strings.TrimSpace(text)
	for _, pair := range [...]string{"[]", "()"} {
		if len(s) >= 2 && s[0] == pair[0] && s[len(s)-1] == pair[1] {
			s = strings.TrimSpace(s[1 : len(s)-1])
			break
		}
	}
	return s
}

// plainUnit is what the spelling is judged by: no blanks, and one spelling for
// the letters that have several code points.
func plainUnit(text string) string {
	s := strings.Join(strings.Fields(bareUnit(text)), "")
	s = unitLetters.Replace(s)
	for _, per := range [...]string{"/sq", "/square", "/□"} { // sheet resistance
		if n := len(s) - len(per); n > 0 && strings.EqualFold(s[n:], per) && strings.HasSuffix(strings.ToLower(s[:n]), "ohm") {
			s = s[:n]
		}
	}
	return s
}

var unitLetters = strings.NewReplacer("\u00b5", "u", "\u03bc", "u", // micro sign, Greek mu
	"\u03a9", "ohm", "\u2126", "ohm", // Greek omega, ohm sign
	"\u212b", "å", "\u00c5", "å") // angstrom sign, A with ring

// unitSI reads prefix and symbol exactly as SI writes them.
func unitSI(s string) (string, int, bool) {
	for cut := 0; cut <= 1 && cut < len(s); cut++ {
		exp, okPrefix := unitPrefixes[s[:cut]]
		base, okBase := unitSymbols[s[cut:]]
		if okPrefix && okBase {
			return base, exp, true
		}
	}
	return "", 0, false
}

// unitWord reads a unit's name in any case after a prefix letter or name.
func unitWord(s string) (string, int, bool) {
	low := strings.ToLower(s)
	for _, w := range unitWords {
		if !strings.HasSuffix(low, w.word) {
			continue
		}
		prefix := s[:len(s)-len(w.word)]
		if prefix == "M" && w.base == "s" {
			return w.base, -3, true // MSEC; nobody tests for megaseconds
		}
		if exp, ok := unitPrefixes[prefix]; ok {
			return w.base, exp, true
		}
		if exp, ok := prefixWords[strings.ToLower(prefix)]; ok {
			return w.base, exp, true
		}
		// A capital where SI has a small letter: KOHM, NSEC. M never gets here.
		exp, ok := unitPrefixes[strings.ToLower(prefix)]
		return w.base, exp, ok
	}
	return "", 0, false
}

// unitSloppy reads what is not SI because of its case alone.
func unitSloppy(s string) (string, int, bool) {
	if strings.HasPrefix(s, "K") {
		if base, exp, ok := unitSI("k" + s[1:]); ok {
			return base, exp, true
		}
	}
	low := strings.ToLower(s)
	if s != low && s != strings.ToUpper(s) || siemens(s) || s == "M" {
		return "", 0, false
	}
	for symbol, base := range unitSymbols {
		prefix, ok := strings.CutSuffix(low, strings.ToLower(symbol))
		if !ok || len(prefix) > 1 {
			continue
		}
		exp, ok := unitPrefixes[prefix]
		if !ok {
			exp, ok = unitPrefixes[strings.ToUpper(prefix)] // g for G
		}
		if ok && base == "Hz" && prefix == "m" {
			exp = 6
		}
		if ok {
			return base, exp, true
		}
	}
	return "", 0, false
}

// siemens tells spellings that SI reads as siemens, a unit of no test here.
func siemens(s string) bool {
	prefix, ok := strings.CutSuffix(s, "S")
	_, known := unitPrefixes[prefix]
	return ok && known
}

func unitError(text, s string) error {
	if siemens(s) {
		return fmt.Errorf("unit %q could be siemens or seconds; write seconds with a small s, as in ms", text)
	}
	if s == "M" {
		return fmt.Errorf("unit %q could be a prefix or a metre; write m for metres, Mohm for megohms", text)
	}
	if base, _, ok := unitSI(strings.ToLower(s[:min(1, len(s))]) + strings.ToUpper(s[min(1, len(s)):])); ok && s[0] == 'M' {
		return fmt.Errorf("unit %q could be milli or mega; write m%s or M%s", text, base, base)
	}
	return fmt.Errorf("unknown unit %q; known are V, A, ohm, F, s, Hz, m, W with f p n u m k M or G before them, angstrom, degC, %% and ratio", text)
}
