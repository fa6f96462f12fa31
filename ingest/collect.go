package ingest

import (
	"bytes"
	"sync"
)

// collector holds the columns of one file while its blocks are parsed. Each
// block has its rows reserved before it is parsed, so that parsers write where
// the values stay. The columns are allocated once where the size of the file
// tells how many rows to expect.
type collector struct {
	size   int64 // of the raw file
	packed bool
	like   *chunk
	out    *chunk

	// growing is held for reading while out's columns are written, and for
	// writing while they move.
	growing  sync.RWMutex
	reserved int // rows, by the one goroutine that reserves
	cap      int

	mu      sync.Mutex
	next    int
	pending map[int]placed
	text    []globalText
	spans   []span
}

// span is the rows that a block turned out to have.
type span struct{ at, n int }

// placed is a parsed block whose rows begin at.
type placed struct {
	c  *chunk
	at int
}

// newCollector makes one for columns like those of a chunk without rows.
func newCollector(src *source, like *chunk) *collector {
	k := &collector{size: src.size, packed: src.packed != "", like: like, pending: map[int]placed{}, text: make([]globalText, len(like.text))}
	k.out = emptyChunk(like)
	return k
}

func emptyChunk(like *chunk) *chunk {
	return &chunk{file: like.file, text: make([]textColumn, len(like.text)), values: make([][]float64, len(like.values)), odd: map[oddKey]oddCells{}}
}

// reserve makes room for the rows that a block may have, and says where they
// begin and how many these are. The blocks come in the order of the file.
func (k *collector) reserve(b *block, fields int) (at, rows int) {
	at, rows = k.reserved, mostRows(b, fields)
	k.reserved += rows
	if k.reserved > k.cap {
		k.grow(b.raw)
	}
	return at, rows
}

// mostRows is how many rows a block can have: a row a line, but for empty lines
// and comments, which are looked for where lines are too short for the fields of
// the table.
func mostRows(b *block, fields int) int {
	if b.lines*fields <= len(b.buf) {
		return b.lines
	}
	n := 0
	for i := 0; i < len(b.buf); {
		if b.buf[i] != '\n' && b.buf[i] != '#' {
			n++
		}
		i += bytes.IndexByte(b.buf[i:], '\n') + 1
	}
	return n
}

// grow moves the columns to larger ones, as large as the whole file is likely
// to need when its rest is like what was read up to place raw of the file.
func (k *collector) grow(raw int64) {
	k.growing.Lock()
	defer k.growing.Unlock()
	want := 0.
	if raw > 0 {
		want = float64(k.reserved) * float64(k.size) / float64(raw) * 1.02
	}
	if k.packed {
		// The start may pack much better than the rest: then it is looked at
		// again.
		want = min(want*1.02, 16*float64(k.reserved))
	}
	rows := max(int(want), k.cap+k.cap/4, k.reserved+64)
	for s := range k.like.text {
		if k.like.text[s].codes != nil {
			k.out.text[s].codes = larger(k.out.text[s].codes, rows)
		}
	}
	for s := range k.like.ints {
		if k.like.ints[s] != nil {
			k.out.ints[s] = larger(k.out.ints[s], rows)
		}
	}
	if k.like.pass != nil {
		k.out.pass = larger(k.out.pass, rows)
	}
	for s := range k.like.values {
		if k.like.values[s] != nil {
			k.out.values[s] = larger(k.out.values[s], rows)
		}
	}
	k.cap = rows
}

// larger gives a column of length n that starts with s.
func larger[T any](s []T, n int) []T {
	out := make([]T, n)
	largePages(bytesOf(out))
	if len(s) > 0 {
		copy(out, s)
	}
	return out
}

// parse has a block parsed into its place.
func (k *collector) parse(p *parser, b *block, at, rows int) {
	k.growing.RLock()
	defer k.growing.RUnlock()
	c := k.view(at, rows)
	p.block(b, c)
	k.put(b.seq, placed{c, at})
}

// view is the part of the columns at rows [at, at+n).
func (k *collector) view(at, n int) *chunk {
	c, end := emptyChunk(k.like), at+n
	for s := range k.like.text {
		if k.like.text[s].codes != nil {
			c.text[s].codes = k.out.text[s].codes[at:end:end]
		}
	}
	for s := range k.like.ints {
		if k.like.ints[s] != nil {
			c.ints[s] = k.out.ints[s][at:end:end]
		}
	}
	if k.like.pass != nil {
		c.pass = k.out.pass[at:end:end]
	}
	for s := range k.like.values {
		if k.like.values[s] != nil {
			c.values[s] = k.out.values[s][at:end:end]
		}
	}
	return c
}

// put takes a parsed block, and settles all blocks whose turn has come: only in
// the order of the file are the codes of texts the same each time.
func (k *collector) put(seq int, p placed) {
	type job struct {
		placed
		text [][]int32 // codes of the chunk to codes of the file, by slot
	}
	k.mu.Lock()
	k.pending[seq] = p
	var ready []job
	for {
		p, ok := k.pending[k.next]
		if !ok {
			break
		}
		delete(k.pending, k.next)
		k.next++
		ready = append(ready, job{p, k.settle(p)})
	}
	k.mu.Unlock()
	for _, r := range ready {
		for s, m := range r.text {
			// The columns may have moved since the block was parsed.
			if m != nil {
				recode(k.out.text[s].codes[r.at:r.at+r.c.n], m)
			}
		}
	}
}

// settle joins a block's dictionaries and counts to those before.
func (k *collector) settle(p placed) (text [][]int32) {
	c := p.c
	text = make([][]int32, len(c.text))
	for s := range c.text {
		if c.text[s].codes == nil {
			continue
		}
		if m := k.text[s].remap(&c.text[s]); !isIdentity(m) {
			text[s] = m
		}
	}
	k.spans = append(k.spans, span{p.at, c.n})
	k.out.rows.add(&c.rows)
	addOdd(k.out.odd, c.odd)
	return text
}

func isIdentity(m []int32) bool {
	for i, code := range m {
		if code != int32(i) {
			return false
		}
	}
	return true
}

func recode(codes, m []int32) {
	for i, code := range codes {
		if code >= 0 {
			codes[i] = m[code]
		}
	}
}

// finish gives the whole file as one chunk.
func (k *collector) finish() *chunk {
	o := k.out
	for s := range k.text {
		o.text[s].dict = k.text[s].dict
		o.text[s].codes = closeUp(o.text[s].codes, k.spans)
	}
	for s := range o.ints {
		o.ints[s] = closeUp(o.ints[s], k.spans)
	}
	o.pass = closeUp(o.pass, k.spans)
	for s := range o.values {
		o.values[s] = closeUp(o.values[s], k.spans)
	}
	for _, s := range k.spans {
		o.n += s.n
	}
	return o
}

// closeUp moves the rows of a column together where blocks had fewer than were
// reserved.
func closeUp[T any](column []T, spans []span) []T {
	if column == nil {
		return nil
	}
	n := 0
	for _, s := range spans {
		if s.at != n {
			copy(column[n:], column[s.at:s.at+s.n])
		}
		n += s.n
	}
	return column[:n]
}
