package ingest

import (
	"context"
	"fmt"
	"sync"

	"kneepoint/config"
)

// fileData is one file as read.
//
// This is the seam between formats and everything behind it: a reader of a
// format gives one, with a layout that says what its columns are and a chunk that
// holds them, and cleaning, retests and findings are the same for all.
type fileData struct {
	layout     *layout     // nil for a Table in memory
	lot, wafer string      // of rows that do not say
	attributes [][2]string // of the lot
	input      Input
	data       *chunk
	rows       rowCount
	odd        map[oddKey]oddCells
	notes      []Finding
	err        *Error // reading broke off here; what came before is kept
	container  string // folder, pattern or archive that the file was found in
	start      int64  // seconds since 1970 when its test began, 0 unknown
	about      lotFacts
	carried    []Finding // of files that convert wrote: what was found in the first place, by lot
}

// readFile reads one file: its layout from the first block, then all blocks in
// parallel. When the rows contradict what the first block made believe (a
// column turns out to be text, numbers to have a decimal comma), it is read
// again with that known.
func readFile(ctx context.Context, in *input, index int, sch *schema, opt *Options, progress func(int64)) (*fileData, error) {
	fix := map[string]bool{}
	for {
		d, err := readOnce(ctx, in, index, sch, opt, progress, fix)
		if err != nil || !d.contradicted(fix, opt.Product) {
			return d, err
		}
	}
}

const fixDecimal = "\x00decimal"

// contradicted looks for columns that were judged wrongly and adds them to fix.
func (d *fileData) contradicted(fix map[string]bool, product *config.Product) bool {
	l, again := d.layout, false
	comma := 0
	for i, f := range l.fields {
		if f.kind != valueField {
			continue
		}
		c := d.odd[oddKey{field: i, kind: cellBad}]
		if l.long {
			c = oddCells{}
			for k, o := range d.odd { // sums only, the order is all one
				if k.field == i && k.kind == cellBad {
					c.n, c.comma = c.n+o.n, c.comma+o.comma
				}
			}
		}
		if c.n == 0 {
			continue
		}
		numbers := 0
		for _, v := range d.data.values[f.slot] {
			if v == v {
				numbers++
			}
		}
		comma += c.comma
		if c.n > numbers && c.comma*2 < c.n && !l.long && productTest(product, l.names[i]) < 0 && !fix[l.names[i]] {
			fix[l.names[i]] = true
			again = true
		}
	}
	if comma > 0 && !l.decimalSeen && l.sep != ',' && !fix[fixDecimal] {
		fix[fixDecimal] = true
		again = true
	}
	return again
}

func readOnce(ctx context.Context, in *input, index int, sch *schema, opt *Options, progress func(int64), fix map[string]bool) (*fileData, error) {
	src, err := in.text(progress)
	if err != nil {
		return nil, err
	}
	defer src.close()
	k := &blocker{src: src, size: opt.block}
	if err := k.head(); err != nil {
		return nil, err
	}
	l, err := findLayout(in, k.carry, k.eof, opt.Product, fix)
	if err != nil {
		if k.err != nil {
			return nil, src.readError(k.err)
		}
		return nil, err
	}
	sch.adopt(l)
	k.sep, k.want = l.sep, len(l.fields)
	k.carry, k.line = k.carry[l.start:], l.startLine
	d := &fileData{layout: l, lot: l.commented("lot"), wafer: l.commented("wafer"), attributes: l.attributes, notes: l.notes}
	if d.data, err = parseBlocks(ctx, k, newParserSet(l, sch, index, opt)); err != nil {
		return nil, err
	}
	d.rows, d.odd = d.data.rows, d.data.odd
	if k.err != nil {
		d.err = src.readError(k.err)
		if d.data.n == 0 {
			return nil, d.err
		}
	}
	src.drain()
	d.input = Input{File: in.name, SHA256: src.sum(), Format: format(l, src.packed), Bytes: src.raw, Rows: int64(d.rows.read)}
	in.amend(d)
	return d, nil
}

var separatorNames = map[byte]string{',': "comma", ';': "semicolon", '\t': "tab", '|': "bar"}

// format describes the layout in words.
func format(l *layout, packed string) string {
	shape := "wide"
	if l.long {
		shape = "long"
	}
	s := fmt.Sprintf("delimited text, %s, %s", shape, separatorNames[l.sep])
	if l.decimal == ',' {
		s += ", decimal comma"
	}
	if packed != "" {
		s += ", " + packed
	}
	return s
}

// newParserSet makes one parser a worker.
func newParserSet(l *layout, sch *schema, file int, opt *Options) []*parser {
	set := make([]*parser, opt.Workers)
	for i := range set {
		set[i] = newParser(l, sch, file, opt.careful)
	}
	return set
}

// parseBlocks reads blocks in this goroutine and parses them in others.
func parseBlocks(ctx context.Context, k *blocker, parsers []*parser) (*chunk, error) {
	type job struct {
		block
		at, rows int // where its rows go, and how many there may be
	}
	var (
		wg     sync.WaitGroup
		jobs   = make(chan job, len(parsers))
		spare  = make(chan []byte, 2*len(parsers)+2)
		all    = newCollector(k.src, parsers[0].like())
		fields = len(parsers[0].l.fields)
	)
	for _, p := range parsers {
		wg.Go(func() {
			for j := range jobs {
				all.parse(p, &j.block, j.at, j.rows)
				select {
				case spare <- j.buf:
				default:
				}
			}
		})
	}
	var failed error
	for {
		var buf []byte
		select {
		case buf = <-spare:
		default:
		}
		b, ok, err := k.next(ctx, buf)
		if err != nil || !ok {
			failed = err
			break
		}
		b.torn = b.cut && k.err != nil
		at, rows := all.reserve(&b, fields)
		jobs <- job{b, at, rows}
	}
	close(jobs)
	wg.Wait()
	return all.finish(), failed
}
