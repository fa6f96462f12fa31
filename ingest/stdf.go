package ingest

import (
	"context"
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"kneepoint/ingest/stdf"
)

// readSTDF reads an STDF V4 file: a row a part, in the order in which parts were
// finished; a column a parametric test, or a column of one.
//
// Results are float32 in the base unit of the test. A value is the shortest
// decimal that gives that float32, as a float64: 4.2 nA, filed as the float32
// nearest to 4.2e-9, is 4.2e-9 again and equals the limit 4.2 nA. A reading of
// more than seven digits was rounded to about seven when it was filed (relative
// 6e-8), which no reader can undo.
func readSTDF(ctx context.Context, in *input, index int, sch *schema, progress func(int64)) (*fileData, error) {
	src, err := in.raw(progress)
	if err != nil {
		return nil, err
	}
	defer src.close()
	ahead := newReadAhead(rawReader{src})
	defer ahead.close()
	s := &stdfReading{in: in, src: src, ahead: ahead, parts: stdf.NewParts(stdf.NewReader(ahead))}
	s.parts.Compact = true
	for more := true; more; {
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		more = s.some()
	}
	ahead.drain()
	d := &fileData{odd: map[oddKey]oddCells{}}
	if err := s.parts.Err(); err != nil {
		var f *stdf.FormatError
		if errors.As(err, &f) {
			return nil, &Error{File: in.name, What: "is no STDF V4 file: " + f.Text, Remedy: f.Remedy, Err: err}
		}
		if ctx.Err() != nil {
			return nil, ctx.Err()
		}
		d.err = src.readError(err)
		if s.n == 0 {
			return nil, d.err
		}
	}
	if s.n == 0 {
		return nil, s.empty()
	}
	d.rows.read = s.n
	s.finish(d, index, sch)
	order := "little-endian"
	if s.parts.Reader().BigEndian() {
		order = "big-endian"
	}
	d.input = Input{File: in.name, SHA256: src.sum(), Format: "STDF V4, " + order, Bytes: src.raw, Rows: int64(s.n)}
	if in.packed != "" {
		d.input.Format += ", " + in.packed
	}
	return d, nil
}

// empty says why a file without a part has none.
func (s *stdfReading) empty() *Error {
	what := "holds no tested part (no PRR record)"
	if d := s.parts.Damages(); len(d) > 0 {
		what += fmt.Sprintf("; byte %d: %s", d[0].Offset, d[0].Text)
	}
	return &Error{File: s.in.name, What: what, Remedy: "fetch the file again, or name the file of the lot's test"}
}

// stdfReading gathers parts in columns.
type stdfReading struct {
	in      *input
	src     *source
	ahead   *readAhead
	parts   *stdf.Parts
	batch   partBatch
	n, room int

	x, y, site, hard, soft, touch []int32
	wafer, run                    []int32 // indexes of stdf.Parts
	stretch                       []int32 // wafer, when its place holds codes
	head                          []int32
	pass                          []int8
	ids                           partIDs
	values                        [][]float64 // by column: float32 as read, their decimals, or an odd NaN
	columns                       []stdfColumn
	of                            [][]int32 // column by test and place in a multiple result, -1 none
	touches                       []touchState

	converted  int // rows whose results are decimals, or being made so
	converting sync.WaitGroup
	cache      []decimalOf

	functional, functionalFails int
	twice                       int // results of tests that a part has twice
}

// stdfColumn is a test, or one result of a multiple one.
type stdfColumn struct {
	test  *stdf.Test
	place int
	name  string
}

// touchState counts touchdowns on one stretch of a wafer.
type touchState struct {
	n     int32
	first int64 // where the first part of the touchdown at work ended
}

// grow makes room for more rows: for all that are to be expected when the rest
// of the file is like what was read.
func (s *stdfReading) grow() {
	want := max(s.room+s.room/4, 4096)
	if s.n > 0 {
		at := s.parts.Reader().Position()
		if s.in.packed != "" {
			at = s.ahead.taken
		}
		want = max(want, int(float64(s.n)*float64(s.src.size)/float64(max(at, 1))*1.02))
	}
	if s.in.packed == "" {
		const part = 21 // bytes of a PRR, at least
		want = min(want, max(s.room+64, int(s.src.size/part)+64))
	} else {
		want = min(want, max(4*s.room, 4096)) // no file should make this reach far by a guess
	}
	s.converting.Wait() // columns are about to move
	for _, c := range []*[]int32{&s.x, &s.y, &s.site, &s.hard, &s.soft, &s.touch, &s.wafer, &s.run, &s.head} {
		*c = larger(*c, want)
	}
	s.pass = larger(s.pass, want)
	for i := range s.values {
		s.values[i] = larger(s.values[i], want)
	}
	s.room = want
}

func fillNaN(v []float64) {
	nan := math.NaN()
	for i := range v {
		v[i] = nan
	}
}

// some puts the parts that come next into the columns; false when there are no more.
func (s *stdfReading) some() (more bool) {
	b := &s.batch
	b.reset(s.n)
	for more = true; !b.full(); {
		if more = s.parts.Scan(); !more {
			break
		}
		p := s.parts.Part()
		s.add(p)
		b.add(p)
	}
	for i := range b.results {
		s.columnOf(&b.results[i])
	}
	// Programs are of tests that some part had among its results, so that all have
	// their columns now; and what else a part has of them comes after.
	for _, v := range s.values {
		fillNaN(v[b.first:s.n])
	}
	s.plain(b)
	at := 0
	for i := range b.parts {
		for ; at < b.parts[i].results; at++ {
			s.result(b.first+i, &b.results[at])
		}
	}
	if s.n-s.converted >= convertRows {
		s.convert()
	}
	return more
}

// convertRows are the rows whose results are turned into decimals at a time, while
// more are read.
const convertRows = 4 << 10

func (s *stdfReading) convert() {
	s.converting.Wait()
	columns, lo, hi := slices.Clone(s.values), s.converted, s.n
	s.converted = hi
	if s.cache == nil {
		s.cache = make([]decimalOf, 1<<12)
	}
	s.converting.Go(func() {
		for _, v := range columns {
			decimals(v[lo:hi], s.cache)
		}
	})
}

// plain puts the readings of a batch into columns: of parts in a row that go by one
// program a test at a time.
func (s *stdfReading) plain(b *partBatch) {
	for lo := 0; lo < len(b.parts); {
		hi, program := lo+1, b.parts[lo].program
		for hi < len(b.parts) && sameProgram(program, b.parts[hi].program) {
			hi++
		}
		for k, test := range program {
			b.column(k, lo, hi, s.values[s.of[test][0]][b.first:])
		}
		lo = hi
	}
}

// add puts all but the results of a part into a row.
func (s *stdfReading) add(p *stdf.Part) {
	if s.n == s.room {
		s.grow()
	}
	i := s.n
	s.n++
	s.x[i], s.y[i], s.hard[i], s.soft[i] = p.X, p.Y, p.HardBin, p.SoftBin
	s.site[i], s.head[i], s.pass[i] = int32(p.Site), int32(p.Head), p.Pass()
	s.wafer[i], s.run[i] = int32(p.Wafer), int32(p.Run)
	s.touch[i] = s.touchdown(p)
	s.ids.add(p.Wafer, p.RawID())
}

// touchdown counts: parts that were open at the same time were touched at once.
func (s *stdfReading) touchdown(p *stdf.Part) int32 {
	for len(s.touches) <= p.Wafer {
		s.touches = append(s.touches, touchState{})
	}
	t := &s.touches[p.Wafer]
	if t.n == 0 || p.Opened < 0 || p.Opened > t.first {
		t.n++
		t.first = p.Offset
	}
	return t.n
}

// columnOf makes the column of a result, unless there is one.
func (s *stdfReading) columnOf(r *stdf.Result) {
	for len(s.of) <= int(r.Test) {
		s.of = append(s.of, nil)
	}
	for len(s.of[r.Test]) <= int(r.Column) {
		s.of[r.Test] = append(s.of[r.Test], s.column(int(r.Test), len(s.of[r.Test])))
	}
}

func (s *stdfReading) result(row int, r *stdf.Result) {
	if r.Column < 0 {
		return
	}
	c := s.of[r.Test][r.Column]
	if c < 0 {
		s.functional++
		if r.Raw == 0 {
			s.functionalFails++
		}
		return
	}
	v := float64(r.Raw)
	switch {
	case r.Flag&stdf.NotExecuted != 0:
		return
	case !stdf.Usable(r.Flag, r.Parm):
		v = oddNaN[cellInvalid]
	case math.IsInf(v, 0):
		v = oddNaN[infinityIs(v)]
	case v != v:
		return
	}
	if old := s.values[c][row]; old == old {
		s.twice++
		if v != v {
			return // the usable one counts
		}
	}
	s.values[c][row] = v
}

// column makes a column for a test; -1 for a functional one.
func (s *stdfReading) column(test, place int) int32 {
	t := s.parts.Tests()[test]
	if t.Kind == stdf.KindFTR {
		return -1
	}
	s.columns = append(s.columns, stdfColumn{test: t, place: place})
	v := larger[float64](nil, s.room)
	fillNaN(v[:s.n])
	s.values = append(s.values, v)
	return int32(len(s.columns) - 1)
}

// cellInvalid is a result that the tester flags as not to be used.
const cellInvalid status = cellBad + 1
