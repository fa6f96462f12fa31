package stdf

import (
	"bytes"
	"math"
)

// Limits are the unit, scales and limits that hold for a result. Limits are in
// the base unit, NaN when there is none: none given, said to be none by
// OPT_FLAG, NaN, infinite, or the largest number a float32 holds, which writers
// without a flag for it use.
type Limits struct {
	Units                         string // UNITS, without padding
	ResScale, LoScale, HiScale    int8   // see DisplayUnit
	Lower, Upper                  float32
	LowerSpec, UpperSpec          float32
	ResFormat, LoFormat, HiFormat string

	has has
}

// DisplayUnit is the unit that the test program shows results in.
func (l *Limits) DisplayUnit() string { return DisplayUnit(l.Units, l.ResScale) }

// none stands for a number that is not there.
var none = float32(math.NaN())

var noLimits = Limits{Lower: none, Upper: none, LowerSpec: none, UpperSpec: none}

// has says which fields a record gave.
type has uint16

const (
	hasUnits has = 1 << iota
	hasResScale
	hasLower
	hasUpper
	hasLowerSpec
	hasUpperSpec
	hasResFormat
	hasLoFormat
	hasHiFormat
)

// limit is a limit as a file gives it.
func limit(f float32) float32 {
	if f != f || f >= math.MaxFloat32 || f <= -math.MaxFloat32 {
		return none
	}
	return f
}

// own is what a record gives of its own. The positions are those of the
// fields: a field counts when the record reaches it. A text of zero length is
// not given; one of a single zero byte is given as "", which is how the
// standard lets a record override a text with nothing.
//
// A limit whose default and absence are both flagged (bits 4 and 6, or 5 and 7)
// is not given: a writer with nothing to say sets every bit, and a first record
// without a limit has none either way.
func (o *Optional) own(units, formats, spec int) Limits {
	l := noLimits
	if o.Present >= 2 && o.Flag&NoResScale == 0 {
		l.ResScale, l.has = o.ResScale, l.has|hasResScale
	}
	side := func(useDefault, no OptFlag, at int, v float32, scale int8, field has, to *float32, toScale *int8) {
		switch {
		case o.Present < 1 || o.Flag&useDefault != 0:
		case o.Flag&no != 0:
			l.has |= field
		case o.Present >= at:
			*to, *toScale, l.has = limit(v), scale, l.has|field
		}
	}
	side(DefaultLow, NoLow, 5, o.LoLimit, o.LoScale, hasLower, &l.Lower, &l.LoScale)
	side(DefaultHigh, NoHigh, 6, o.HiLimit, o.HiScale, hasUpper, &l.Upper, &l.HiScale)
	if o.Present >= spec && o.Flag&NoLowSpec == 0 {
		l.LowerSpec, l.has = limit(o.LoSpec), l.has|hasLowerSpec
	}
	if o.Present >= spec+1 && o.Flag&NoHighSpec == 0 {
		l.UpperSpec, l.has = limit(o.HiSpec), l.has|hasUpperSpec
	}
	texts := func(at int, s string, field has, to *string) {
		if o.Present >= at && s != "" {
			*to, l.has = trim(s), l.has|field
		}
	}
	texts(units, o.Units, hasUnits, &l.Units)
	texts(formats, o.ResFormat, hasResFormat, &l.ResFormat)
	texts(formats+1, o.LoFormat, hasLoFormat, &l.LoFormat)
	texts(formats+2, o.HiFormat, hasHiFormat, &l.HiFormat)
	return l
}

func (o *Optional) ownPTR() Limits    { return o.own(7, 8, 11) }
func (o *MPROptional) ownMPR() Limits { return o.Optional.own(10, 12, 15) }

// take puts the given fields of from into l.
func (l *Limits) take(from *Limits, fields has) {
	if fields&hasUnits != 0 {
		l.Units = from.Units
	}
	if fields&hasResScale != 0 {
		l.ResScale = from.ResScale
	}
	if fields&hasLower != 0 {
		l.Lower, l.LoScale = from.Lower, from.LoScale
	}
	if fields&hasUpper != 0 {
		l.Upper, l.HiScale = from.Upper, from.HiScale
	}
	if fields&hasLowerSpec != 0 {
		l.LowerSpec = from.LowerSpec
	}
	if fields&hasUpperSpec != 0 {
		l.UpperSpec = from.UpperSpec
	}
	if fields&hasResFormat != 0 {
		l.ResFormat = from.ResFormat
	}
	if fields&hasLoFormat != 0 {
		l.LoFormat = from.LoFormat
	}
	if fields&hasHiFormat != 0 {
		l.HiFormat = from.HiFormat
	}
	l.has |= fields
}

// same says whether two hold the same, whoever gave it.
func (l *Limits) same(m *Limits) bool {
	eq := func(a, b float32) bool { return a == b || a != a && b != b }
	return l.Units == m.Units && l.ResScale == m.ResScale && l.LoScale == m.LoScale && l.HiScale == m.HiScale &&
		eq(l.Lower, m.Lower) && eq(l.Upper, m.Upper) && eq(l.LowerSpec, m.LowerSpec) && eq(l.UpperSpec, m.UpperSpec) &&
		l.ResFormat == m.ResFormat && l.LoFormat == m.LoFormat && l.HiFormat == m.HiFormat
}

// maxLimits is how many different limits of one test are kept.
const maxLimits = 32

// settle finds what holds for a record that gives own, and lets it define the
// test's defaults when it is the first of its run to give any. A field that no
// record has given yet is defined by the first that does.
func (t *Test) settle(own *Limits, run int, scratch *Limits) (l *Limits, which int) {
	def := t.Limits[t.Default]
	switch {
	case !t.given:
		t.given, t.run = true, run
		def.take(own, own.has)
		return def, t.Default
	case t.run != run: // the first of a run that follows another in the file
		t.run = run
		*scratch = *def
		scratch.take(own, own.has)
		l, which = t.keep(scratch)
		if which >= 0 {
			t.Default = which
		}
		t.forget()
		return l, which
	}
	if fill := own.has &^ def.has; fill != 0 {
		def.take(own, fill)
		t.forget()
	}
	*scratch = *def
	scratch.take(own, own.has)
	l, which = t.keep(scratch)
	return l, which
}

// keep finds l among the test's limits or adds it; -1 and l itself when there
// are too many.
func (t *Test) keep(l *Limits) (*Limits, int) {
	if t.Limits[t.Default].same(l) {
		return t.Limits[t.Default], t.Default
	}
	for i, k := range t.Limits {
		if k.same(l) {
			return k, i
		}
	}
	if len(t.Limits) == maxLimits {
		return l, -1
	}
	kept := *l
	t.Limits = append(t.Limits, &kept)
	return &kept, len(t.Limits) - 1
}

// LimitsOf are the limits that a result of the test was judged by. Where they
// were not kept, as the test has too many different ones, they are unknown: NaN,
// with the unit and scale of the default.
func (t *Test) LimitsOf(r *Result) Limits {
	if r.Limits >= 0 && int(r.Limits) < len(t.Limits) {
		return *t.Limits[r.Limits]
	}
	l := noLimits
	l.take(t.Limits[t.Default], hasUnits|hasResScale|hasResFormat)
	return l
}

// seen remembers how the optional part of a PTR was read: most records of a
// test either leave it out or repeat it byte for byte.
type seen struct {
	raw    []byte
	opt    Optional
	limits *Limits // nil: nothing remembered
	which  int
	own    Limits // what limits points to when the test does not keep them
}

// recall finds what was read of the same bytes before.
func (t *Test) recall(raw []byte, run int) *seen {
	if t.run != run {
		return nil
	}
	for _, s := range t.seen {
		if s != nil && s.limits != nil && bytes.Equal(s.raw, raw) {
			return s
		}
	}
	return nil
}

// place is where to remember an optional part that is new: the first stays,
// later ones take turns in the second place.
func (t *Test) place() *seen {
	i := 1
	if t.seen[0] == nil || t.seen[0].limits == nil {
		i = 0
	}
	if t.seen[i] == nil {
		t.seen[i] = new(seen)
	}
	return t.seen[i]
}

// forget drops what was read: the defaults it was joined with have changed.
func (t *Test) forget() {
	for _, s := range t.seen {
		if s != nil {
			s.limits = nil
		}
	}
}
