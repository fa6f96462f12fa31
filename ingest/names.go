package ingest

import (
	"strings"
	"unicode"
)

// roleNames are the usual spellings of each column role, best first, as
// letters and digits only (see plainName). They are common practice, no source.
var roleNames = map[string][]string{
	"lot":       {"lot", "lotid", "lotno", "lotnumber", "lotnum", "lotnr", "lotname", "lotcode", "batch", "batchid", "batchno", "run", "runid", "lotref", "los", "losnr", "losnummer"},
	"wafer":     {"wafer", "waferid", "waferno", "wafernumber", "wafernum", "wafernr", "wafername", "waf", "wafid", "wafno", "wfr", "wfrid", "wfrno", "wf", "wfid", "wno", "wid", "slice", "sliceno", "sliceid", "scheibe", "scheibennr", "scheibennummer", "w"},
	"x":         {"diex", "xdie", "diecol", "diecolumn", "x", "xcoord", "xcoordinate", "coordx", "xpos", "xposition", "posx", "xloc", "locx", "xindex", "indexx", "xaddress", "xaddr", "dx", "col", "column", "colno", "spalte"},
	"y":         {"diey", "ydie", "dierow", "y", "ycoord", "ycoordinate", "coordy", "ypos", "yposition", "posy", "yloc", "locy", "yindex", "indexy", "yaddress", "yaddr", "dy", "row", "rowno", "zeile"},
	"site":      {"site", "siteno", "sitenumber", "sitenum", "sitenr", "siteid", "testsite", "probesite", "dut", "dutno"},
	"touchdown": {"touchdown", "touchdownno", "touchdownnumber", "td", "tdno", "tdnr", "seq", "seqno", "sequence", "sequenceno", "sequencenumber", "testorder", "order", "testseq", "testsequence", "index", "dieindex", "dieno", "dienumber", "dienr", "recno", "record", "recordno", "rowid", "no", "nr"},
	"hard_bin":  {"hbin", "hardbin", "hardbinno", "hardbinnumber", "hbinno", "hbinnum", "hardwarebin", "hwbin", "hb", "bin", "binno", "binnumber", "bincode", "binid"},
	"soft_bin":  {"sbin", "softbin", "softbinno", "softbinnumber", "sbinno", "sbinnum", "softwarebin", "swbin", "sb"},
	"pass":      {"passfail", "pass", "pf", "passed", "passflag", "pfflag", "passfailflag", "diepass", "ispass", "good", "status", "verdict", "result", "diestatus", "flag"},
	"part":      {"partid", "part", "dieid", "die", "chipid", "chip", "serial", "serialno", "serialnumber", "sn", "unitid", "ecid", "partno", "partnumber", "deviceno", "id"},
	"time":      {"testtime", "time", "timestamp", "datetime", "testdatetime", "testtimestamp", "testdate", "date", "endtime", "starttime", "measuredat", "testedat"},
	"test":      {"test", "testname", "parameter", "parametername", "param", "paramname", "testparam", "testparameter", "measurement", "measurementname", "item", "testitem", "testid", "characteristic", "variable"},
	"value":     {"value", "val", "reading", "measuredvalue", "measvalue", "testvalue", "resultvalue", "paramvalue", "measured", "meas", "result", "testresult", "data"},
	"unit":      {"unit", "units", "uom", "testunit", "unitofmeasure", "measunit", "valueunit"},
	"lower":     {"lower", "lsl", "lowlimit", "lowerlimit", "lolimit", "lolim", "lowlim", "lowerspec", "lowerspeclimit", "ll", "ltl", "min", "minlimit", "limitlow", "limitmin", "limlow", "specmin", "specmin", "minimum"},
	"upper":     {"upper", "usl", "highlimit", "upperlimit", "hilimit", "hilim", "highlim", "upperspec", "upperspeclimit", "hl", "ul", "utl", "max", "maxlimit", "limithigh", "limitmax", "limhigh", "specmax", "maximum"},

	// Not in config.Roles: found unaided only.
	roleProduct: {"product", "productid", "productname", "parttype", "devicetype", "devicename", "device", "type", "producttype"},
	roleNumber:  {"testnumber", "testno", "testnum", "testnr", "tnum", "tno"},
	roleAt:      {"condition", "conditions", "testcondition", "testconditions", "bias", "at"},
}

const (
	roleProduct = "product"
	roleNumber  = "test number"
	roleAt      = "condition"
)

// longRoles make sense only in a long table.
var longRoles = map[string]bool{"test": true, "value": true, "unit": true, "lower": true, "upper": true, roleNumber: true, roleAt: true}

// roleOrder is the fixed order in which roles look for a column.
var roleOrder = []string{"lot", "wafer", "x", "y", "site", "touchdown", "hard_bin", "soft_bin", "test", "value", "unit", "lower",
	"upper", roleNumber, roleAt, "pass", "part", "time", roleProduct}

// attributeNames are columns of numbers that are no tests, in plainName form.
// Common practice, no source.
var attributeNames = set("temp", "temperature", "testtemp", "testtemperature", "chucktemp", "chucktemperature", "tempc", "head", "testhead", "headno",
	"probecard", "probecardid", "card", "tester", "testerid", "station", "prober", "program", "testprogram", "programrev", "revision", "rev",
	"retest", "retestcount", "retestno", "pass", "passno", "numtest", "testcount", "numtests", "partflag", "source", "supplier", "reactor",
	"pocket", "boat", "boatposition", "boatpos", "slot", "slotno", "cassette", "furnace", "run", "epirun", "batch", "operator", "shift", "zone",
	"ring", "quadrant", "radius", "shot", "shotx", "shoty", "reticle", "reticlex", "reticley", "fieldx", "fieldy", "week", "year", "month",
	"tool", "equipment", "split", "splitid", "group", "fab", "flow", "step", "level", "nsites", "needle", "elapsed", "elapsedms", "testtimems",
	"touchdown", "index", "sequence")

// weakNames are role names that tests bear too: a second column of such a name,
// beside a better one for the role, is a test when it holds fractions.
var weakNames = set("w", "wf", "dx", "dy", "col", "column", "row", "no", "nr", "order", "index", "slice", "run", "td", "hb", "sb", "pf", "id", "sn", "seq", "flag", "good")

func set(words ...string) map[string]bool {
	m := make(map[string]bool, len(words))
	for _, w := range words {
		m[w] = true
	}
	return m
}

// plainName is a header name as letters and digits only, in small letters.
func plainName(s string) string {
	return strings.Map(func(r rune) rune {
		if unicode.IsLetter(r) || unicode.IsDigit(r) {
			return unicode.ToLower(r)
		}
		return -1
	}, s)
}

// bracket parts "ICBO [nA]" or "ICBO (nA)" into name and the text in brackets.
func bracket(s string) (name, inside string) {
	s = strings.TrimSpace(s)
	for _, p := range []string{"[]", "()", "{}"} {
		if !strings.HasSuffix(s, p[1:]) {
			continue
		}
		if i := strings.LastIndexByte(s, p[0]); i > 0 {
			if n := strings.TrimSpace(s[:i]); n != "" {
				return n, strings.TrimSpace(s[i+1 : len(s)-1])
			}
		}
	}
	return s, ""
}

// rowKind is what a row between header and data says.
type rowKind int

const (
	dataRow rowKind = iota
	unitRow
	lowerRow
	upperRow
	numberRow
	conditionRow
	otherRow // understood to be no data, and of no use here
)

// rowWords are the words by which such rows are told, in plainName form.
var rowWords = map[string]rowKind{}

func init() {
	for kind, words := range map[rowKind][]string{
		unitRow:      {"unit", "units", "uom", "unitofmeasure"},
		lowerRow:     roleNames["lower"],
		upperRow:     roleNames["upper"],
		numberRow:    {"number", "testnumber", "testno", "testnum", "testnr", "tnum"},
		conditionRow: {"condition", "conditions", "testcondition", "testconditions", "bias"},
		otherRow:     {"target", "nominal", "typical", "typ", "description", "mean", "average", "median", "stddev", "stdev", "sigma", "format", "datatype", "role"},
	} {
		for _, w := range words {
			rowWords[w] = kind
		}
	}
	for _, w := range []string{"lo", "low", "lolimit", "lsl"} {
		rowWords[w] = lowerRow
	}
	for _, w := range []string{"hi", "high", "hsl", "usl"} {
		rowWords[w] = upperRow
	}
}
