package config

import (
	"regexp"
	"strings"
)

// GuessMeasures guesses what a test measures from its name, and holds the guess
// against the unit when there is one: "" where nothing fits, where two things
// do, and for names of quantities derived from others (DELTA_HFE, HFE1/HFE2).
//
// It knows the usual spellings, in any case, with digits, bias and position
// around them: BVCEO, BV_CEO, V(BR)CEO, VCEO1, BVceo_1mA, LVCEO; ICBO_20V;
// HFE1, H_FE, BETA; VCE_SAT, VCE(sat), VCESAT@50mA; COB, CCB, CJC, COBO; RPINCH;
// FT in hertz. Common practice, no source. A guess is for a draft that a person
// reads through.
func GuessMeasures(name string, unit Unit) string {
	s := separators.ReplaceAllString(strings.ToUpper(name), "_")
	if derived.MatchString("_" + s + "_") {
		return ""
	}
	found := ""
	for _, m := range Measures {
		if !spellings[m].MatchString("_" + s + "_") {
			continue
		}
		if unit.Given() && unit.Base != measuredIn[m] {
			continue
		}
		switch {
		case found == "" || found == "rb" && m == "rpinch": // RB_PINCH has both
			found = m
		default:
			return ""
		}
	}
	return found
}

var separators = regexp.MustCompile(`[^A-Z0-9]+`)

// derived matches names of quantities computed from several readings, and of
// statistics about them.
var derived = regexp.MustCompile(`_(DELTA|DIFF|D|RATIO|SHIFT|DRIFT|LOG|LN|SLOPE|SIGMA|STDEV|STD|MEAN|AVG|MEDIAN|MIN|MAX|LIMIT|PASS|FAIL|FLAG|TIME|MATCH|LIN|INV)\d*_` +
	`|_(DELTA|DIFF|DHFE|DV)[A-Z]*_`)

// spellings find a role in a name whose separators are single underscores, with
// one at either end. Before the role stands no letter; digits after it, such as
// those of HFE1, may be followed by a unit (BVCEO1MA).
var spellings = func() map[string]*regexp.Regexp {
	out := map[string]*regexp.Regexp{}
	for role, pattern := range map[string]string{
		"bvceo":  `(?:L?B?_?V_?(?:BR_?)?CE_?O|L_?V_?CEO)(?:_?SUS)?`,
		"bvcbo":  `B?_?V_?(?:BR_?)?CB_?O`,
		"bvebo":  `B?_?V_?(?:BR_?)?EB_?O`,
		"bvces":  `B?_?V_?(?:BR_?)?CE_?S`,
		"icbo":   `I_?CB_?O`,
		"iceo":   `I_?CE_?O`,
		"iebo":   `I_?EB_?O`,
		"hfe":    `(?:H_?FE|BETA)`,
		"vcesat": `V_?CE_?(?:ON_?)?SAT`,
		"vbesat": `V_?BE_?SAT`,
		"rb":     `R_?BB?`,
		"rc":     `R_?C(?:S|SAT|_?SERIES)?`,
		"rpinch": `(?:R_?(?:B_?)?PINCH|PINCH_?R(?:ES)?)`,
		"cob":    `C_?(?:OBO?|CBO?|BC|JC|TC)`,
		"ft":     `F_?T`,
	} {
		out[role] = regexp.MustCompile(`(?:_|\d)` + pattern + `(?:_|\d)`)
	}
	return out
}()
