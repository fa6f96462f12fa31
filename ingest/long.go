package ingest

import "fmt"

// pivot joins the rows of long tables into measurements of dice.
//
// Rows belong to the same die when lot, wafer, x and y are the same; without
// coordinates, part or else site take their place. A test that comes again for
// the same die starts a new measurement of it, a retest. When the rows of one
// test follow each other for a die (the table is sorted by test), its k-th
// reading from the end goes to the k-th measurement from the end: what counts
// is the last one.
func (t *readings) pivot() {
	var long []*chunk
	for i, f := range t.files {
		t.tally.Rows += f.rows.read
		for o, reason := range rowReasons {
			if n := f.rows.odd[o].n; n > 0 {
				t.tally.Discarded[reason] += n
			}
		}
		if f.layout != nil && f.layout.long {
			long = append(long, f.data)
		} else {
			t.chunks = append(t.chunks, f.data)
		}
		t.files[i].data = nil
	}
	if len(long) == 0 {
		return
	}
	// One pivot a file when wide and long are mixed would lose nothing, but
	// readings of one die may be spread over several long files.
	p := newPivot(t, long)
	p.assign()
	t.chunks = append(t.chunks, p.chunk())
}

// pivoting is the work of pivot.
type pivoting struct {
	t     *readings
	long  []*chunk
	n     int
	test  []int32 // schema slot of each row, -1: no test named
	die   []int32 // die of each row
	meas  []int32 // measurement of each row, -1: not used
	prev  []int32 // row before of the same die, -1: none
	dies  []dieState
	ofDie []int32 // die of each measurement
	seq   []int32 // touchdown of each measurement, where that tells them apart
	file  int
	text  []globalText // by text slot
}

// dieState is what is known of a die while its rows come in.
type dieState struct {
	last int32   // its last row
	meas []int32 // its measurements
	seen uint64  // tests below 64 in the last measurement
}

// dieKey tells dice of a long table apart.
type dieKey struct {
	lot, wafer, part int32
	x, y, site       int32
}

// globalText numbers the texts of a slot over all chunks.
type globalText struct {
	codes map[string]int32
	dict  []string
}

func (g *globalText) code(s string) int32 {
	if g.codes == nil {
		g.codes = map[string]int32{}
	}
	c, ok := g.codes[s]
	if !ok {
		c = int32(len(g.dict))
		g.codes[s] = c
		g.dict = append(g.dict, s)
	}
	return c
}

// remap gives the global codes of a chunk's column.
func (g *globalText) remap(c *textColumn) []int32 {
	m := make([]int32, len(c.dict))
	for i, s := range c.dict {
		m[i] = g.code(s)
	}
	return m
}

func newPivot(t *readings, long []*chunk) *pivoting {
	p := &pivoting{t: t, long: long, text: make([]globalText, textAttributes+len(t.sch.attributes)), file: long[0].file}
	for _, c := range long {
		p.n += c.n
	}
	return p
}

// textCodes gives the global codes of a text column's cells.
func (p *pivoting) textCodes(c *chunk, slot int) func(i int) int32 {
	if slot >= len(c.text) || c.text[slot].codes == nil {
		return func(int) int32 { return -1 }
	}
	m := p.text[slot].remap(&c.text[slot])
	codes := c.text[slot].codes
	return func(i int) int32 {
		if codes[i] < 0 {
			return -1
		}
		return m[codes[i]]
	}
}

func intAt(c *chunk, slot int) func(i int) int32 {
	if c.ints[slot] == nil {
		return func(int) int32 { return Missing }
	}
	col := c.ints[slot]
	return func(i int) int32 { return col[i] }
}

// assign gives every row its measurement.
func (p *pivoting) assign() {
	coordinates, parts, sites := false, false, false
	for _, c := range p.long {
		coordinates = coordinates || c.ints[intX] != nil && c.ints[intY] != nil
		parts = parts || c.text[textPart].codes != nil
		sites = sites || c.ints[intSite] != nil
	}
	p.t.siteIsDie = !coordinates && !parts && sites
	unnamed := p.join(false)
	if p.t.siteIsDie && 2*len(p.ofDie) > 3*len(p.dies) {
		// Sites that come again and again are those of a tester, not of a wafer.
		p.t.siteIsDie = false
		p.join(true)
	}
	if !coordinates && !parts && !p.t.siteIsDie {
		p.t.note(all, Warning, "no-die-identity", "the long table has no coordinates and no part id; the k-th reading of each test on a wafer is taken as die k",
			"export die coordinates or part ids with the readings", 0)
	}
	if unnamed > 0 {
		p.t.tally.Discarded["no-test-name"] += unnamed
		p.t.note(all, Warning, "no-test-name", fmt.Sprintf("%d %s no test name; not used", unnamed, plural(unnamed, "row gives", "rows give")), "fill the column of test names", 0)
	}
}

// join walks through the rows. counting joins the k-th readings of each test of
// a key instead of telling dice apart.
func (p *pivoting) join(counting bool) (unnamed int) {
	p.test, p.die = make([]int32, 0, p.n), make([]int32, 0, p.n)
	p.meas, p.prev = make([]int32, 0, p.n), make([]int32, 0, p.n)
	p.dies, p.ofDie, p.seq = nil, nil, nil
	bySeq := p.touchdownIsMeasurement()
	ids := map[dieKey]int32{}
	counts := map[[2]int32]int{}
	lastKey, lastDie := dieKey{}, int32(-1)
	for _, c := range p.long {
		lot, wafer, part, test := p.textCodes(c, textLot), p.textCodes(c, textWafer), p.textCodes(c, textPart), p.textCodes(c, textTest)
		x, y, site, seq := intAt(c, intX), intAt(c, intY), intAt(c, intSite), intAt(c, intTouchdown)
		slots := p.testSlots()
		for i := range c.n {
			key := dieKey{lot: lot(i), wafer: wafer(i), part: -1, x: x(i), y: y(i), site: Missing}
			anonymous := counting
			if key.x == Missing || key.y == Missing {
				key.x, key.y = Missing, Missing
				if key.part = part(i); key.part < 0 {
					key.site = site(i)
					anonymous = anonymous || key.site == Missing
				}
			}
			if lastDie < 0 || key != lastKey {
				id, ok := ids[key]
				if !ok {
					id = int32(len(p.dies))
					ids[key] = id
					p.dies = append(p.dies, dieState{last: -1})
				}
				lastKey, lastDie = key, id
			}
			slot := int32(-1)
			if tc := test(i); tc >= 0 {
				slot = int32(slots[tc])
			}
			switch {
			case slot < 0:
				unnamed++
				p.row(lastDie, slot, -1)
			case anonymous:
				k := counts[[2]int32{lastDie, slot}]
				counts[[2]int32{lastDie, slot}] = k + 1
				if d := &p.dies[lastDie]; k < len(d.meas) {
					p.row(lastDie, slot, d.meas[k])
				} else {
					p.row(lastDie, slot, p.open(lastDie, Missing))
				}
			case bySeq && seq(i) != Missing:
				p.add(lastDie, slot, seq(i))
			default:
				p.add(lastDie, slot, Missing)
			}
		}
	}
	return unnamed
}

// testSlots maps codes of test names to slots of the schema.
func (p *pivoting) testSlots() []int {
	names := p.text[textTest].dict
	slots := make([]int, len(names))
	for i, n := range names {
		slots[i] = p.t.sch.test(n)
	}
	return slots
}

// row notes one row.
func (p *pivoting) row(die, test, meas int32) {
	d := &p.dies[die]
	p.test, p.die = append(p.test, test), append(p.die, die)
	p.prev, p.meas = append(p.prev, d.last), append(p.meas, meas)
	if test >= 0 {
		d.last = int32(len(p.test) - 1)
		if test < 64 && len(d.meas) > 0 && d.meas[len(d.meas)-1] == meas {
			d.seen |= 1 << test
		}
	}
}

// open starts a measurement of a die.
func (p *pivoting) open(die, seq int32) int32 {
	m := int32(len(p.ofDie))
	p.ofDie, p.seq = append(p.ofDie, die), append(p.seq, seq)
	d := &p.dies[die]
	d.meas, d.seen = append(d.meas, m), 0
	return m
}

// add places one reading of a die that is known. seq, when not Missing, is the
// touchdown that all rows of one measurement share.
func (p *pivoting) add(die, test, seq int32) {
	d := &p.dies[die]
	if len(d.meas) == 0 {
		p.row(die, test, p.open(die, seq))
		return
	}
	current := d.meas[len(d.meas)-1]
	if seq != p.seq[current] {
		for _, m := range d.meas {
			if p.seq[m] == seq && p.find(die, test, m) < 0 {
				p.row(die, test, m)
				return
			}
		}
		p.row(die, test, p.open(die, seq))
		return
	}
	if test < 64 && d.seen&(1<<test) == 0 || test >= 64 && p.find(die, test, current) < 0 {
		p.row(die, test, current)
		return
	}
	const most = 16 // measurements of one die in which to look for a gap
	if p.test[d.last] == test && seq == Missing && len(d.meas) <= most && p.shift(die, test) {
		p.row(die, test, current)
		return
	}
	p.row(die, test, p.open(die, seq))
}

// find gives the row that holds a test in a measurement of a die, -1 for none.
func (p *pivoting) find(die, test, meas int32) int32 {
	for r := p.dies[die].last; r >= 0; r = p.prev[r] {
		if p.meas[r] == meas && p.test[r] == test {
			return r
		}
	}
	return -1
}

// shift moves the readings of a test one measurement back, so that a new one
// can stand in the last; false when no earlier one lacks the test.
func (p *pivoting) shift(die, test int32) bool {
	meas := p.dies[die].meas
	holders := make([]int32, len(meas))
	free := -1
	for k := len(meas) - 1; k >= 0 && free < 0; k-- {
		if holders[k] = p.find(die, test, meas[k]); holders[k] < 0 {
			free = k
		}
	}
	if free < 0 {
		return false
	}
	for k := free + 1; k < len(meas); k++ {
		p.meas[holders[k]] = meas[k-1]
	}
	return true
}

// touchdownIsMeasurement says whether the touchdown column numbers measurements
// of dice: neighbouring rows of one die mostly share it. Where it numbers the
// rows it does not tell measurements apart.
func (p *pivoting) touchdownIsMeasurement() bool {
	same, other := 0, 0
	for _, c := range p.long {
		x, y, seq := c.ints[intX], c.ints[intY], c.ints[intTouchdown]
		if x == nil || y == nil || seq == nil {
			continue
		}
		for i := 1; i < c.n; i++ {
			if x[i] != x[i-1] || y[i] != y[i-1] {
				continue
			}
			if seq[i] == seq[i-1] {
				same++
			} else {
				other++
			}
		}
	}
	return same > other
}
