package stdf

import (
	"fmt"
	"math"
	"strconv"
)

// Missing stands in the integer fields of Part for what the file does not give.
const Missing = -1 << 31

// Parts puts the records of a Reader together to parts, one for each PRR, in
// the order of the PRRs: the order in which parts were finished. Results of
// several sites may come mixed between PIR and PRR; they are told apart by head
// and site.
//
//	p := stdf.NewParts(stdf.NewReader(f))
//	for p.Scan() {
//		part := p.Part()
//		...
//	}
//	if err := p.Err(); err != nil { ... }
//	for _, d := range p.Damages() { ... }
//
// The Part belongs to Parts and is overwritten by the next Scan. What belongs
// to the lot is in Runs, Wafers and Tests: complete when Scan has returned
// false.
type Parts struct {
	// Watch, when set, is given every record but PIR, PTR, MPR, FTR and PRR as
	// it passes, for what Parts does not keep (DTR, GDR, ATR ...).
	Watch func(Record)

	// Compact, when set before the first Scan, leaves the results of parts that
	// go by a program in Part.Plain: most of a file, and quicker so.
	Compact bool

	r       *Reader
	part    Part
	heads   [256]*[256]*slot
	open    []*slot // every slot made, in the order made
	last    *slot   // of the last parametric result
	program *program
	learned int64    // programs so far
	moved   int64    // of the Reader, seen here
	results []Result // of the part, unless they are in its slot
	runs    []*Run
	wafers  []*Wafer
	onHead  [256]*Wafer
	inDoubt [256]bool // the wafer on a head may have ended in a gap
	pins    map[uint16]*PMR
	number  int64
	careful bool  // keep the quick ways out
	gaps    int64 // of the Reader, seen here
	closed  bool

	orphans int64
}

// Part is one tested part.
type Part struct {
	Run, Wafer int    // indexes in Parts.Runs and Parts.Wafers
	WaferID    string // as known when the part ended; see Wafer.ID
	Number     int64  // in the file, from 1
	Offset     int64  // of the PRR
	Opened     int64  // offset of the PIR; of the first result without one; -1 neither
	Head, Site uint8
	HardBin    int32 // HARD_BIN, Missing
	SoftBin    int32 // SOFT_BIN, Missing
	X, Y       int32 // Missing
	Flag       PartFlag
	Tests      uint16 // NUM_TEST, as the file claims
	TestTime   uint32 // ms, 0 missing
	Results    []Result
	HasPIR     bool

	// Plain are the first results of the part, those before Results, when
	// Parts.Compact is set; Plain[i] is of test Program[i]. No test is twice in a
	// Program, and all its tests have one column. Parts that share a program have
	// the same slice.
	Plain   []Reading
	Program []int32

	// Damaged says that bytes were skipped, or an odd record was met, while the
	// part was open: results may be missing. Skipped bytes can hide the end of
	// one part and the start of the next: the results before them are left out,
	// so that all of Results are of this part.
	Damaged bool

	id, text []byte
	program  *program
}

// PlainResult is Plain[i] as a result.
func (p *Part) PlainResult(i int) Result { return p.program.result(i, p.Plain[i]) }

// ID is PART_ID.
func (p *Part) ID() string { return text(p.id) }

// RawID is PART_ID as it stands in the file, good until the next Scan; Text makes
// text of it.
func (p *Part) RawID() []byte { return p.id }

// Text is PART_TXT.
func (p *Part) Text() string { return text(p.text) }

// Pass is 1 when the part passed, 0 when it failed, -1 when its flag says that
// it does not tell.
func (p *Part) Pass() int8 {
	switch pass, known := p.Flag.Pass(); {
	case !known:
		return -1
	case pass:
		return 1
	}
	return 0
}

// Result is one result of a part. A multiple-result record gives one for each
// of its results.
type Result struct {
	Test int32 // index in Tests
	// Raw is RESULT as it stands in the file, in the base unit; of a functional
	// test 1 for pass, 0 for fail. NaN where the file has none. Value is what
	// to compute with.
	Raw    float32
	Limits int16 // index in Test.Limits, -1 when they are not kept there; see Test.LimitsOf
	Column int16 // MPR: place of the result in its record, from 0; -1 when the record has none; else 0
	Flag   TestFlag
	Parm   ParmFlag
}

// Value is the result as a number: NaN when the standard does not let it be
// used (see Usable). It may be infinite, where a tester marks overrange so.
func (r *Result) Value() float64 {
	if !Usable(r.Flag, r.Parm) {
		return math.NaN()
	}
	return float64(r.Raw)
}

// slot is what is going on at one site.
type slot struct {
	head, site uint8
	place      uint16 // of these as they stand in a record, low byte first
	opened     int64  // as in Part
	hasPIR     bool
	isOpen     bool // has a PIR or results that no PRR has claimed
	damaged    bool
	plain      []Reading // the first results, by the program
	program    *program  // nil none
	steps      []step    // of the program
	due        int       // step whose reading is due; -1 none
	results    []Result  // the others

	after *slot // that had the next result, the last time
	run   *Run
	site1 *Site // of that run
}

// NewParts reads from r, which must be at the start of its stream.
func NewParts(r *Reader) *Parts { return &Parts{r: r, pins: make(map[uint16]*PMR)} }

// Part is the part that the last Scan found.
func (p *Parts) Part() *Part { return &p.part }

// Reader is the record stream.
func (p *Parts) Reader() *Reader { return p.r }

// Err is why Scan stopped; see Reader.Err.
func (p *Parts) Err() error { return p.r.err }

// Damages are what is wrong with the file, records and parts; see
// Reader.Damages.
func (p *Parts) Damages() []Damage { return p.r.Damages() }

// DamageCounts counts them; see Reader.DamageCounts.
func (p *Parts) DamageCounts() []DamageCount { return p.r.DamageCounts() }

// Runs are the runs met so far, one for each MIR.
func (p *Parts) Runs() []*Run { return p.runs }

// Wafers are the wafers met so far, in the order of their first records.
func (p *Parts) Wafers() []*Wafer { return p.wafers }

// Tests are the tests met so far; see Reader.Tests.
func (p *Parts) Tests() []*Test { return p.r.Tests() }

// Orphans counts the results that no part claims.
func (p *Parts) Orphans() int64 { return p.orphans }

// PinName is the name of the pin or channel with the PMR index: the logical
// one, else the physical one, else the channel's; "" when there is none.
func (p *Parts) PinName(index uint16) string {
	m := p.pins[index]
	if m == nil {
		return ""
	}
	for _, name := range []string{m.Logical, m.Physical, m.Channel} {
		if s := trim(name); s != "" {
			return s
		}
	}
	return ""
}

// ColumnName names a column of an MPR test: its pin, else its place from 1.
func (p *Parts) ColumnName(t *Test, column int) string {
	if column >= 0 && column < len(t.Pins) {
		if s := p.PinName(t.Pins[column]); s != "" {
			return s
		}
		if t.Pins[column] != 0 {
			return "pin " + itoa(int(t.Pins[column]))
		}
	}
	return "#" + itoa(column+1)
}

// Scan goes to the next part; false at the end of what can be read.
func (p *Parts) Scan() bool {
	for {
		if p.quick() {
			return true
		}
		if !p.r.Scan() {
			break
		}
		if p.gaps != p.r.gaps {
			p.gap()
		}
		if p.r.oddAt == p.r.at && p.r.at > 0 {
			p.odd(p.r.rec)
		}
		if p.moved != p.r.moved {
			p.stop()
		}
		switch p.r.kind {
		case KindPTR:
			p.parametric(&p.r.ptr)
			if !p.careful {
				p.r.plainRun(p)
			}
		case KindPIR:
			p.begin(&p.r.pir)
		case KindPRR:
			p.end(&p.r.prr)
			return true
		case KindMPR:
			p.multiple(&p.r.mpr)
		case KindFTR:
			p.functional(&p.r.ftr)
		default:
			p.lot(p.r.rec)
			if p.Watch != nil {
				p.Watch(p.r.rec)
			}
		}
	}
	if !p.closed {
		p.closed = true
		if p.gaps != p.r.gaps {
			p.gap()
		}
		p.finishRun()
	}
	return false
}

func (p *Parts) slot(head, site uint8) *slot {
	h := p.heads[head]
	if h == nil {
		h = new([256]*slot)
		p.heads[head] = h
	}
	s := h[site]
	if s == nil {
		s = &slot{head: head, site: site, place: uint16(head) | uint16(site)<<8, due: -1}
		h[site] = s
		p.open = append(p.open, s)
	}
	return s
}

// begin opens a part.
func (p *Parts) begin(m *PIR) {
	s := p.slot(m.Head, m.Site)
	p.abandon(s, "the next part of its site begins")
	s.opened, s.hasPIR, s.isOpen, s.damaged = p.r.at, true, true, false
	s.drop()
	p.follow(s)
}

// abandon gives up what is open at a site: a PRR will not come.
func (p *Parts) abandon(s *slot, why string) {
	if !s.isOpen {
		return
	}
	n := s.number()
	p.orphans += int64(n)
	kind := DamageNoPRR
	if !s.hasPIR {
		kind = DamageOrphans
	}
	if d := &p.r.damages; d.count(kind, 0) {
		text := fmt.Sprintf("the part that begins here on head %d, site %d has no PRR: %s; it and its %s are left out",
			s.head, s.site, why, plural(n, "result"))
		if !s.hasPIR {
			text = fmt.Sprintf("%s from here on, of head %d, site %d, are of no part: %s; they are left out",
				plural(n, "result"), s.head, s.site, why)
		}
		d.list = append(d.list, Damage{s.opened, kind, 0, text})
	}
	s.isOpen, s.damaged = false, false
	s.drop()
}

// at gives the slot that a result belongs to. One without a PIR is kept: its
// PRR may come.
func (p *Parts) at(head, site uint8) *slot {
	s := p.slot(head, site)
	if s.isOpen {
		return s
	}
	s.opened, s.hasPIR, s.isOpen, s.damaged = p.r.at, false, true, false
	s.drop()
	return s
}

func (p *Parts) parametric(m *PTR) {
	if m.Test.Index < 0 || m.Flag&NotExecuted != 0 && !p.isOpen(m.Head, m.Site) {
		return // its test is beyond the bounds, which is counted; or it only defines defaults
	}
	s := p.last
	if s == nil || s.head != m.Head || s.site != m.Site || !s.isOpen {
		s = p.at(m.Head, m.Site)
		p.last = s
	}
	if p.expected(s, m) {
		return
	}
	s.add(Result{int32(m.Test.Index), m.Result, int16(m.which), 0, m.Flag, m.Parm})
}

func (p *Parts) isOpen(head, site uint8) bool {
	h := p.heads[head]
	return h != nil && h[site] != nil && h[site].isOpen
}

func (p *Parts) multiple(m *MPR) {
	if m.Flag&NotExecuted != 0 && !p.isOpen(m.Head, m.Site) || m.Test.Index < 0 {
		return
	}
	s := p.at(m.Head, m.Site)
	for i, v := range m.Results {
		s.add(Result{int32(m.Test.Index), v, int16(m.which), int16(i), m.Flag, m.Parm})
	}
	if len(m.Results) == 0 {
		s.add(Result{int32(m.Test.Index), none, int16(m.which), -1, m.Flag, m.Parm})
	}
}

func (p *Parts) functional(m *FTR) {
	if m.Flag&NotExecuted != 0 && !p.isOpen(m.Head, m.Site) || m.Test.Index < 0 {
		return
	}
	s := p.at(m.Head, m.Site)
	v := float32(0)
	switch pass, known := m.Flag.Pass(); {
	case !known:
		v = none
	case pass:
		v = 1
	}
	s.add(Result{int32(m.Test.Index), v, int16(m.Test.Default), 0, m.Flag, 0})
}

// end closes a part.
func (p *Parts) end(m *PRR) {
	s := p.slot(m.Head, m.Site)
	run := p.currentRun()
	w := p.wafer(m.Head)
	p.number++
	part := &p.part
	// Field by field, as a part is too large to be made and copied each time.
	part.Run, part.Wafer, part.WaferID, part.Number, part.Offset, part.Opened = run.Index, w.Index, w.ID, p.number, p.r.at, -1
	part.Head, part.Site, part.HardBin, part.SoftBin, part.X, part.Y = m.Head, m.Site, Missing, Missing, Missing, Missing
	part.Flag, part.Tests, part.TestTime, part.Damaged, part.HasPIR = m.Flag, m.Tests, m.TestTime, s.damaged, false
	part.id, part.text = m.PartID, m.PartText
	part.Results, part.Plain, part.Program = nil, nil, nil
	if m.HardBin != NoBin {
		part.HardBin = int32(m.HardBin)
	}
	if m.SoftBin != NoBin {
		part.SoftBin = int32(m.SoftBin)
	}
	if m.X != NoCoordinate {
		part.X = int32(m.X)
	}
	if m.Y != NoCoordinate {
		part.Y = int32(m.Y)
	}
	if s.isOpen {
		part.Opened, part.HasPIR = s.opened, s.hasPIR
		p.give(part, s)
	}
	if !part.HasPIR {
		p.r.damages.add(p.r.at, DamageNoPIR, 0, "the part that ends here on head %d, site %d has no PIR; it is kept with the %s before it",
			m.Head, m.Site, plural(s.number(), "result"))
	}
	if part.Damaged {
		p.r.damages.add(p.r.at, DamageGap, 0, "the part that ends here on head %d, site %d lies over a damaged place; what is left of it is %s",
			m.Head, m.Site, plural(s.number(), "result"))
	}
	// What the part holds are views of the slot's, good until the next Scan.
	s.isOpen, s.damaged = false, false
	s.drop()
	if s.run != run {
		s.run, s.site1 = run, run.site(m.Head, m.Site)
	}
	run.count(part, s.site1)
	w.Parts++
	if part.Pass() == 1 {
		w.Good++
	}
	if m.Flag.Retest() {
		w.Retested++
	}
}

// give gives a part that ends its results.
func (p *Parts) give(part *Part, s *slot) {
	if len(s.results) > 0 {
		p.learn(s)
	}
	switch {
	case len(s.plain) == 0:
		part.Results = s.results
	case p.Compact:
		part.Plain, part.Program, part.program, part.Results = s.plain, s.program.tests, s.program, s.results
	default:
		p.results = s.all(p.results[:0])
		part.Results = p.results
	}
}

// odd marks the part that an odd result or PRR belongs to.
func (p *Parts) odd(rec Record) {
	var s *slot
	switch m := rec.(type) {
	case *PTR:
		s = p.at(m.Head, m.Site)
	case *MPR:
		s = p.at(m.Head, m.Site)
	case *FTR:
		s = p.at(m.Head, m.Site)
	case *PRR:
		s = p.slot(m.Head, m.Site)
	default:
		return
	}
	s.damaged = true
}

// gap marks what is open over a damaged place. Where records may be missing,
// the end of one part and the start of the next can be among them, and the end
// and start of wafers: what came before is not joined with what comes after.
func (p *Parts) gap() {
	for _, s := range p.open {
		if s.isOpen {
			s.damaged = true
			if p.r.torn {
				p.orphans += int64(s.number())
				s.drop()
			}
		}
	}
	if p.r.torn {
		for head, w := range p.onHead {
			p.inDoubt[head] = p.inDoubt[head] || w != nil && w.WIR != nil
		}
	}
	p.gaps, p.r.torn = p.r.gaps, false
}

func quote(s string) string { return strconv.Quote(s) }
func itoa(n int) string     { return strconv.Itoa(n) }
