package stdf

// Test is one test of the program: the records of one kind, test number and
// text. A record without a text is of the first test with its number.
//
// Most files give a number one text, or give the text in the first record only.
// Where a number is used for several texts they are several tests; each has its
// own defaults, and those of the number's first test where it gives none.
type Test struct {
	Index  int    // its place in Reader.Tests
	Kind   Kind   // KindPTR, KindMPR or KindFTR
	Number uint32 // TEST_NUM
	Text   string // TEST_TXT, or TEST_NAM of a TSR when no record gives one; without padding

	// Limits are the different units, scales and limits that its records were
	// judged by, never empty: at first those of the first record that gives
	// any, then others as records override them or a later run of the file
	// brings its own. Default says which hold for records that give none.
	Limits     []*Limits
	Default    int
	Overridden int64 // records that were judged by other limits than the default
	NotKept    int64 // of them, those whose limits are not in Limits: it is full

	Records int64
	Columns int      // MPR: the most results of a record; else 1
	Pins    []uint16 // MPR: PMR index of each result, by the first record that gives them

	Sequence, Label string // SEQ_NAME and TEST_LBL of a TSR
	Summary         *TSR   // the TSR over all sites, else the first one; nil none

	raw      string // TEST_TXT as in the file, to find the test again
	text     string // the same, as PTR.Text gives it
	first    bool   // of its number
	siblings int    // of the first: tests with its number and another text
	next     *Test  // the test whose record came after the last one of this
	run      int    // that Default is of
	given    bool   // some record has given limits
	size     int    // of the body of its last PTR
	seen     [2]*seen
	tail     ptrTail
	part     int64 // number of the last part whose tests were looked through; see Parts.steps
}

// ptrTail is what stood behind RESULT in a record that was judged by the defaults:
// text, alarm and optional part, of which no more needs to be known when the same
// bytes come again.
type ptrTail struct {
	raw   []byte
	run   int // of the Reader
	which int
	known bool
}

// Bounds on what a damaged or hostile file can make of tests. Records of tests
// beyond them are delivered, with a Test whose Index is -1, and counted.
const (
	maxTests    = 1 << 16
	maxSiblings = 1 << 12
)

// registry finds the test of a record. Programs run their tests in the same
// order for each part, so the test that came after the last one is tried first;
// then the last one itself, for sites that take turns.
type registry struct {
	list    []*Test
	byNum   map[uint64]*Test  // the first test of each number
	byText  map[textKey]*Test // the others
	early   map[uint64]*TSR   // summaries of tests not yet met
	last    *Test
	outside *Test // stands for the tests beyond the bounds
}

type textKey struct {
	num  uint64
	text string
}

func numKey(k Kind, number uint32) uint64 { return uint64(k)<<32 | uint64(number) }

// is says whether a record of the number and text is of test t.
func (t *Test) is(k Kind, number uint32, text []byte) bool {
	if t.Number != number || t.Kind != k {
		return false
	}
	return len(text) == 0 && t.first || len(text) > 0 && t.raw == string(text)
}

// find gives the test of a record, making it when it is new.
func (r *registry) find(k Kind, number uint32, text []byte) *Test {
	t := r.due(k, number, text)
	if t == nil {
		t = r.look(k, number, text)
		if t.Index < 0 {
			return t
		}
		if r.last != nil {
			r.last.next = t
		}
	}
	r.last = t
	return t
}

// due gives the test of a record if it is one of the two tried first, else nil.
func (r *registry) due(k Kind, number uint32, text []byte) *Test {
	last := r.last
	switch {
	case last == nil:
	case last.next != nil && last.next.is(k, number, text):
		return last.next
	case last.is(k, number, text):
		return last
	}
	return nil
}

func (r *registry) look(k Kind, number uint32, raw []byte) *Test {
	key := numKey(k, number)
	first := r.byNum[key]
	if first != nil {
		if first.is(k, number, raw) {
			return first
		}
		if first.raw == "" { // the records so far left the text out
			first.name(raw)
			return first
		}
		if t := r.byText[textKey{key, string(raw)}]; t != nil {
			return t
		}
	}
	if len(r.list) >= maxTests || first != nil && first.siblings >= maxSiblings {
		if r.outside == nil {
			limits := noLimits
			r.outside = &Test{Index: -1, Columns: 1, Limits: []*Limits{&limits}}
		}
		return r.outside
	}
	limits := noLimits
	t := &Test{Index: len(r.list), Kind: k, Number: number, Columns: 1, first: first == nil}
	t.name(raw)
	if r.byNum == nil {
		r.byNum, r.byText = make(map[uint64]*Test), make(map[textKey]*Test)
	}
	if first == nil {
		r.byNum[key] = t
		if s := r.early[key]; s != nil {
			t.sum(s)
		}
	} else {
		r.byText[textKey{key, string(raw)}] = t
		first.siblings++
		limits = *first.Limits[first.Default]
		limits.has = 0
	}
	t.Limits = []*Limits{&limits}
	r.list = append(r.list, t)
	return t
}

// name gives the test its text.
func (t *Test) name(raw []byte) {
	if len(raw) > 0 {
		t.raw = string(raw)
		t.text = text(raw)
		t.Text = trim(t.text)
	}
}

// summary joins a TSR with its test. A TSR that comes before the test waits for
// it; one that does not tell its type is of the first kind that has its number.
func (r *registry) summary(m *TSR) {
	candidates := []Kind{KindPTR, KindFTR, KindMPR}
	switch m.Type {
	case 'P':
		candidates = candidates[:1]
	case 'F':
		candidates = candidates[1:2]
	case 'M':
		candidates = candidates[2:]
	}
	for _, k := range candidates {
		key := numKey(k, m.Number)
		if t := r.byText[textKey{key, m.Name}]; t != nil {
			t.sum(m)
			return
		}
		if t := r.byNum[key]; t != nil {
			t.sum(m)
			return
		}
	}
	key := numKey(candidates[0], m.Number)
	if r.early == nil {
		r.early = make(map[uint64]*TSR)
	}
	if old := r.early[key]; old == nil && len(r.early) < maxTests || old != nil && m.Head == AllSites {
		r.early[key] = Clone(m).(*TSR)
	}
}

// sum takes a summary over: names from any, counts from the one over all sites.
func (t *Test) sum(m *TSR) {
	if t.Text == "" {
		t.Text = trim(m.Name)
	}
	if t.Sequence == "" {
		t.Sequence = trim(m.Sequence)
	}
	if t.Label == "" {
		t.Label = trim(m.Label)
	}
	if t.Summary == nil || m.Head == AllSites {
		t.Summary = Clone(m).(*TSR)
	}
}
