package ingest

import "kneepoint/ingest/stdf"

// partBatch is the results of some parts, which in a stdf.Part hold until the next
// only. Columns are written a test at a time for all of them.
type partBatch struct {
	first   int // row of the first part
	parts   []partResults
	plain   []stdf.Reading
	results []stdf.Result
}

// partResults says where those of a part end, and what program it went by.
type partResults struct {
	program        []int32
	plain, results int
}

const (
	batchParts   = 256
	batchResults = 64 << 10 // a part may have very many
)

func (b *partBatch) reset(first int) {
	b.first, b.parts, b.plain, b.results = first, b.parts[:0], b.plain[:0], b.results[:0]
}

func (b *partBatch) full() bool {
	return len(b.parts) == batchParts || len(b.plain)+len(b.results) >= batchResults
}

func (b *partBatch) add(p *stdf.Part) {
	b.plain = append(b.plain, p.Plain...)
	b.results = append(b.results, p.Results...)
	b.parts = append(b.parts, partResults{p.Program, len(b.plain), len(b.results)})
}

// column puts reading k of parts lo to hi into the rows of a column.
func (b *partBatch) column(k, lo, hi int, to []float64) {
	start := 0
	if lo > 0 {
		start = b.parts[lo-1].plain
	}
	to = to[lo:hi]
	for i := range b.parts[lo:hi] {
		end := b.parts[lo+i].plain
		if at := start + k; at < end {
			if v := float64(b.plain[at].Raw); v-v == 0 {
				to[i] = v
			} else if v == v {
				to[i] = oddNaN[infinityIs(v)]
			}
		}
		start = end
	}
}

func sameProgram(a, b []int32) bool {
	return len(a) == len(b) && (len(a) == 0 || &a[0] == &b[0])
}
