package ingest

import "sync"

// collector joins the chunks of one file, which come in any order, in the order
// of the file. The columns are allocated once where the size of the file tells
// how many rows to expect, so that the table is never in memory twice.
type collector struct {
	size int64 // of the raw file

	mu      sync.Mutex
	next    int
	pending map[int]parsed
	text    []globalText
	out     *chunk
	free    []*chunk // for use again

	// growing is held for reading while a chunk is copied into out, and for
	// writing while out's columns move.
	growing sync.RWMutex
	cap     int
}

// parsed is a chunk on its way; raw is how far into the raw file its block
// reached.
type parsed struct {
	c   *chunk
	raw int64
}

// placed is a chunk whose rows have their place.
type placed struct {
	c    *chunk
	at   int
	text [][]int32 // codes of the chunk to codes of the file, by slot
}

func newCollector(size int64, like *chunk) *collector {
	k := &collector{size: size, pending: map[int]parsed{}, text: make([]globalText, len(like.text))}
	k.out = &chunk{file: like.file, text: make([]textColumn, len(like.text)), values: make([][]float64, len(like.values)), odd: map[oddKey]oddCells{}}
	return k
}

// chunk gives a chunk that nobody uses any more, nil when there is none.
func (k *collector) chunk() *chunk {
	k.mu.Lock()
	defer k.mu.Unlock()
	if n := len(k.free); n > 0 {
		c := k.free[n-1]
		k.free = k.free[:n-1]
		return c
	}
	return nil
}

// put takes a chunk, and copies all chunks whose turn has come.
func (k *collector) put(seq int, p parsed) {
	k.mu.Lock()
	k.pending[seq] = p
	var ready []placed
	for {
		p, ok := k.pending[k.next]
		if !ok {
			break
		}
		delete(k.pending, k.next)
		k.next++
		ready = append(ready, k.place(p))
	}
	k.mu.Unlock()
	for _, r := range ready {
		k.growing.RLock()
		k.copy(r)
		k.growing.RUnlock()
		k.mu.Lock()
		k.free = append(k.free, r.c)
		k.mu.Unlock()
	}
}

// place gives a chunk its rows and joins its dictionaries and counts.
func (k *collector) place(p parsed) placed {
	c := p.c
	r := placed{c: c, at: k.out.n, text: make([][]int32, len(c.text))}
	k.out.n += c.n
	for s := range c.text {
		if c.text[s].codes != nil {
			r.text[s] = k.text[s].remap(&c.text[s])
		}
	}
	k.out.rows.add(&c.rows)
	addOdd(k.out.odd, c.odd)
	if k.out.n > k.cap {
		k.grow(c, p.raw)
	}
	return r
}

// grow moves the columns to larger ones, as large as the whole file is likely
// to need when its rest is like what was read.
func (k *collector) grow(like *chunk, raw int64) {
	k.growing.Lock()
	defer k.growing.Unlock()
	want := k.cap + k.cap/4
	if raw > 0 {
		want = max(want, int(float64(k.out.n)*float64(k.size)/float64(raw)*1.02))
	}
	want = max(want, k.out.n+64)
	for s := range like.text {
		if like.text[s].codes != nil {
			k.out.text[s].codes = larger(k.out.text[s].codes, want)
		}
	}
	for s := range like.ints {
		if like.ints[s] != nil {
			k.out.ints[s] = larger(k.out.ints[s], want)
		}
	}
	if like.pass != nil {
		k.out.pass = larger(k.out.pass, want)
	}
	for s := range like.values {
		if like.values[s] != nil {
			k.out.values[s] = larger(k.out.values[s], want)
		}
	}
	k.cap = want
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

// copy puts a chunk's rows in their place.
func (k *collector) copy(r placed) {
	c, o, n := r.c, k.out, r.c.n
	for s := range c.text {
		if c.text[s].codes == nil {
			continue
		}
		to, m := o.text[s].codes[r.at:r.at+n], r.text[s]
		for i, code := range c.text[s].codes[:n] {
			if code >= 0 {
				code = m[code]
			}
			to[i] = code
		}
	}
	for s := range c.ints {
		if c.ints[s] != nil {
			copy(o.ints[s][r.at:r.at+n], c.ints[s])
		}
	}
	if c.pass != nil {
		copy(o.pass[r.at:r.at+n], c.pass)
	}
	for s := range c.values {
		if c.values[s] != nil {
			copy(o.values[s][r.at:r.at+n], c.values[s])
		}
	}
}

// finish gives the whole file as one chunk.
func (k *collector) finish() *chunk {
	for s := range k.text {
		k.out.text[s].dict = k.text[s].dict
	}
	k.out.trim()
	return k.out
}
