package ingest

import (
	"maps"
	"math"
	"slices"
	"strings"

	"github.com/apache/arrow/go/v17/arrow/array"
)

// lot cleans a draft and makes the Lot.
func (d *draft) lot(opt *Options) *Lot {
	for i := range d.values {
		d.values[i] = slices.Clip(d.values[i])
	}
	d.workers = opt.Workers
	d.ownOrder = d.ints[intTouchdown] != nil
	d.touchdowns()
	d.orderTests()
	d.seen = make([]extremes, len(d.tests))
	d.marks = make([][]int8, len(d.tests))
	d.takeMarks()
	d.eachTest(opt, d.numbers)
	keep := d.retests(opt)
	l := &Lot{id: d.id, inputs: d.inputs, wafers: d.wafers}
	d.attributes(l)
	l.earlier, l.first = d.split(keep)
	d.wafers = slices.DeleteFunc(d.wafers, func(w Wafer) bool { return w.Lo == w.Hi }) // nothing tested
	l.wafers = d.wafers
	for i := range l.wafers {
		if l.wafers[i].Attributes == nil {
			l.wafers[i].Attributes = map[string]string{}
		}
	}
	d.places()
	d.outlines()
	censor := make([][]int8, len(d.tests))
	d.eachTest(opt, func(i int) []Finding {
		marks, findings := d.bounds(i)
		censor[i] = marks
		return append(findings, d.scale(i)...)
	})
	l.cols = columns{n: d.n, site: int32Column(d.ints[intSite]), touchdown: int32Column(d.ints[intTouchdown]),
		hardBin: int32Column(d.ints[intHardBin]), softBin: int32Column(d.ints[intSoftBin]), pass: int8Column(d.pass)}
	if d.ints[intX] != nil && d.ints[intY] != nil {
		l.cols.x, l.cols.y = int32Column(d.ints[intX]), int32Column(d.ints[intY])
	}
	for i := range d.tests {
		l.tests = append(l.tests, d.tests[i].test())
		l.cols.values = append(l.cols.values, float64Column(d.values[i]))
		var c *array.Int8
		if censor[i] != nil {
			c = int8Column(censor[i])
		}
		l.cols.censor = append(l.cols.censor, c)
	}
	for s := range d.text {
		if d.text[s] != nil {
			labels := usedLabels(d.text[s], d.dict[s])
			l.cols.attributes = append(l.cols.attributes, dieAttribute{name: d.textNames[s], codes: int32Column(d.text[s]), labels: labels})
		}
	}
	l.findings, l.shared = d.findings, d.shared
	l.about, l.piles, l.after, l.given = d.about, d.piles(), d.after, d.marks
	return l
}

func (i *testInfo) test() Test {
	return Test{Name: i.name, Measures: i.measures, Unit: i.unit, Lower: i.lower, Upper: i.upper, LimitsFrom: i.limitsFrom,
		Condition: i.condition, Clamp: i.clamp, Floor: i.floor, Number: i.number, Place: i.place}
}

// orderTests puts the product file's tests first, in its order.
func (d *draft) orderTests() {
	place := make([]int, len(d.tests))
	for i := range place {
		place[i] = i
	}
	key := func(i int) int {
		if p := d.tests[i].product; p >= 0 {
			return p
		}
		return math.MaxInt
	}
	slices.SortStableFunc(place, func(a, b int) int {
		switch ka, kb := key(a), key(b); {
		case ka < kb:
			return -1
		case ka > kb:
			return 1
		}
		return 0
	})
	tests, values, slots := slices.Clone(d.tests), slices.Clone(d.values), slices.Clone(d.slots)
	for i, p := range place {
		d.tests[i], d.values[i], d.slots[i] = tests[p], values[p], slots[p]
		d.tests[i].place = p
	}
}

// touchdowns numbers the measurements of each wafer where the file does not.
func (d *draft) touchdowns() {
	if !d.ownOrder {
		t := larger[int32](nil, d.n)
		d.eachWafer(func(_ int, w Wafer) {
			for i := range t[w.Lo:w.Hi] {
				t[w.Lo+i] = int32(i + 1)
			}
		})
		d.ints[intTouchdown] = t
		return
	}
	// Rows without a number were sorted behind the row before them.
	var t []int32
	for _, w := range d.wafers {
		last := int32(0)
		for i := w.Lo; i < w.Hi; i++ {
			if v := d.ints[intTouchdown][i]; v != Missing {
				last = v
				continue
			}
			if t == nil {
				t = slices.Clone(d.ints[intTouchdown])
			}
			t[i] = last
		}
	}
	if t != nil {
		d.ints[intTouchdown] = t
	}
}

// attributes sorts the text columns by what they belong to: the lot, a wafer,
// a die.
func (d *draft) attributes(l *Lot) {
	l.attributes = map[string]string{}
	for _, kv := range d.comments {
		switch {
		case isRole(kv[0], "lot"), isRole(kv[0], "wafer"):
		case isRole(kv[0], roleProduct):
			l.product = kv[1]
		default:
			l.attributes[kv[0]] = kv[1]
		}
	}
	maps.Copy(l.attributes, d.about.attributes)
	for s := range d.text {
		if d.text[s] == nil {
			continue
		}
		level := d.from.sch.levels[s]
		if level == levelDie {
			continue
		}
		if code, ok := oneCode(d.text[s]); ok && level != levelWafer {
			if code >= 0 {
				if s == textProduct {
					l.product = d.dict[s][code]
				} else {
					l.attributes[d.textNames[s]] = d.dict[s][code]
				}
			}
			d.text[s] = nil
			continue
		}
		byWafer := make([]int32, len(d.wafers))
		all := true
		for w := range d.wafers {
			code, ok := oneCode(d.text[s][d.wafers[w].Lo:d.wafers[w].Hi])
			if !ok {
				all = false
				break
			}
			byWafer[w] = code
		}
		if !all {
			continue
		}
		for w, code := range byWafer {
			if code < 0 {
				continue
			}
			if l.wafers[w].Attributes == nil {
				l.wafers[w].Attributes = map[string]string{}
			}
			l.wafers[w].Attributes[d.textNames[s]] = d.dict[s][code]
		}
		d.text[s] = nil
	}
}

func isRole(key, role string) bool {
	k := plainName(key)
	return slices.Contains(roleNames[role], k)
}

// usedLabels numbers the labels of a column anew, in the order of first use, and
// gives those that are used.
func usedLabels(codes []int32, dict []string) []string {
	var labels []string
	now := make([]int32, len(dict))
	for i := range now {
		now[i] = -1
	}
	for i, c := range codes {
		if c < 0 {
			continue
		}
		if now[c] < 0 {
			now[c] = int32(len(labels))
			labels = append(labels, dict[c])
		}
		codes[i] = now[c]
	}
	return labels
}

// oneCode gives the only code of a column, empty cells apart; -1 when there is
// none.
func oneCode(codes []int32) (int32, bool) {
	one := int32(-1)
	for _, c := range codes {
		if c < 0 || c == one {
			continue
		}
		if one >= 0 {
			return 0, false
		}
		one = c
	}
	return one, true
}

func (d *draft) note(s Severity, code, text, remedy string, dice int) {
	d.findings = append(d.findings, Finding{Code: code, Severity: s, Text: strings.TrimSpace(text), Remedy: remedy, Dice: dice})
}
