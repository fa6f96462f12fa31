package ingest

import (
	"errors"
	"fmt"
	"io"
	"runtime"
	"sync"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"golang.org/x/sync/errgroup"
)

// parquet reads row groups and columns in parallel: a task is one column of one
// row group, for text all of a column, as its dictionary is that of the file.
func (t *tableReading) parquet() error {
	at, size, done, err := t.in.at()
	if err != nil {
		return err
	}
	defer done()
	if err := checkParquet(at, size); err != nil {
		return err
	}
	props := parquet.NewReaderProperties(t.limit)
	pf, err := file.NewParquetReader(io.NewSectionReader(at, 0, size), file.WithReadProps(props))
	if err != nil {
		return err
	}
	fr, err := pqarrow.NewFileReader(pf, pqarrow.ArrowReadProperties{BatchSize: groupRows}, t.limit)
	if err != nil {
		return err
	}
	s, err := fr.Schema()
	if err != nil {
		return err
	}
	if err := t.checkSizes(pf, size); err != nil {
		return err
	}
	rows := pf.NumRows()
	if rows == 0 {
		return t.noRows()
	}
	if rows < 0 || rows > 1<<31-1 {
		return fmt.Errorf("it says that it holds %d rows", rows)
	}
	offset := make([]int, pf.NumRowGroups()+1)
	for g := range pf.NumRowGroups() {
		n := pf.RowGroup(g).NumRows()
		if n < 0 || n > rows {
			return fmt.Errorf("row group %d says that it holds %d rows", g, n)
		}
		offset[g+1] = offset[g] + int(n)
	}
	if int64(offset[len(offset)-1]) != rows {
		return errors.New("the row groups do not add up to the rows of the file")
	}
	walks := sync.Pool{New: func() any { return &pageWalk{from: at, size: size, limit: t.limit} }}
	read := func(group, field int, do func(arrow.Array, int) error) error {
		// A nested field has no column of its own, and is not read.
		w := walks.Get().(*pageWalk)
		err := w.chunk(pf.RowGroup(group), fr.Manifest.Fields[field].ColIndex, nil)
		if walks.Put(w); err != nil {
			return fmt.Errorf("row group %d, column %s: %w", group, quote(s.Field(field).Name), err)
		}
		chunks, err := fr.RowGroup(group).Column(field).Read(t.ctx)
		if err != nil {
			return fmt.Errorf("row group %d, column %s: %w", group, quote(s.Field(field).Name), err)
		}
		defer chunks.Release()
		row := offset[group]
		if chunks.Len() != offset[group+1]-row {
			return fmt.Errorf("row group %d, column %s: %d rows, %d wanted", group, quote(s.Field(field).Name), chunks.Len(), offset[group+1]-row)
		}
		for _, a := range chunks.Chunks() {
			if err := do(a, row); err != nil {
				return err
			}
			row += a.Len()
		}
		return nil
	}
	sample, err := t.parquetSample(s, pf, read)
	if err != nil {
		return err
	}
	if err := t.start(s, min(int(rows), sampleRows, offset[1]), sample); err != nil {
		return err
	}
	if err := t.makeRoom(int(rows)); err != nil {
		return err
	}
	t.c.n = int(rows)
	g, ctx := errgroup.WithContext(t.ctx)
	g.SetLimit(t.opt.Workers)
	run := func(groups []int, field int, do func(group int) error) {
		g.Go(func() error {
			return guard(t.in.name, func() error {
				for _, group := range groups {
					if err := ctx.Err(); err != nil {
						return err
					}
					if err := do(group); err != nil {
						return err
					}
				}
				return nil
			})
		})
	}
	var groups []int
	for i := range pf.NumRowGroups() {
		if pf.RowGroup(i).NumRows() > 0 {
			groups = append(groups, i)
		}
	}
	for i, f := range t.layout.fields {
		if f.kind == skipField {
			continue
		}
		do := func(group int) error {
			return read(group, i, func(a arrow.Array, row int) error { return t.column(i, a, row) })
		}
		if leaf := fr.Manifest.Fields[i].ColIndex; t.direct(pf, groups, i, leaf) {
			do = func(group int) error {
				w := walks.Get().(*pageWalk)
				defer walks.Put(w)
				if err := t.fill(w, pf.RowGroup(group), leaf, i, offset[group]); err != nil {
					return fmt.Errorf("row group %d, column %s: %w", group, quote(s.Field(i).Name), err)
				}
				return nil
			}
		}
		if f.kind == textField {
			run(groups, i, do)
			continue
		}
		for k := range groups {
			run(groups[k:k+1], i, do)
		}
	}
	return g.Wait()
}

// checkSizes holds the footer's claims against the size of the file: chunks do not
// share bytes, and a row takes a bit at least.
func (t *tableReading) checkSizes(pf *file.Reader, size int64) error {
	const fewRows = 64 << 10 // that may be all alike
	if n := pf.NumRows(); n > fewRows && n/8 > size {
		return &Error{File: t.in.name, What: fmt.Sprintf("says that it holds %d rows, which cannot be in a file of %d bytes", n, size), Remedy: "fetch or export the file again"}
	}
	left := size
	for g := range pf.NumRowGroups() {
		meta := pf.MetaData().RowGroup(g)
		for i := range meta.NumColumns() {
			c, err := meta.ColumnChunk(i)
			if err != nil {
				return err
			}
			if n := c.TotalCompressedSize(); n < 0 || n > left {
				return errClaims
			}
			left -= c.TotalCompressedSize()
		}
	}
	return nil
}

// parquetSample reads the first rows of a file from elsewhere as text.
func (t *tableReading) parquetSample(s *arrow.Schema, pf *file.Reader, read func(int, int, func(arrow.Array, int) error) error) (func(field, row int) string, error) {
	if ownMeta(s) != nil {
		return nil, nil
	}
	text := make([][]string, s.NumFields())
	for i, f := range s.Fields() {
		if isNested(f.Type) {
			continue
		}
		err := read(0, i, func(a arrow.Array, _ int) error {
			at, err := cellTexts(a)
			if err != nil {
				return err
			}
			for k := 0; k < a.Len() && len(text[i]) < sampleRows; k++ {
				c := ""
				if !a.IsNull(k) {
					c = oneText(at(k))
				}
				text[i] = append(text[i], c)
			}
			return nil
		})
		if err != nil {
			return nil, err
		}
	}
	return func(field, row int) string {
		if row < len(text[field]) {
			return text[field][row]
		}
		return ""
	}, nil
}

// arrowFile reads an Arrow IPC file.
func (t *tableReading) arrowFile() error {
	at, size, done, err := t.in.at()
	if err != nil {
		return err
	}
	defer done()
	if t.expect, err = checkArrowFile(at, size); err != nil {
		return err
	}
	r, err := ipc.NewFileReader(io.NewSectionReader(at, 0, size), ipc.WithAllocator(t.limit))
	if err != nil {
		return err
	}
	defer r.Close()
	i := 0
	return t.batches(r.Schema(), func() (arrow.Record, error) {
		if i == r.NumRecords() {
			return nil, io.EOF
		}
		rec, err := r.Record(i)
		i++
		return rec, err
	})
}

// arrowStream reads an Arrow IPC stream, as far as its messages are sound.
func (t *tableReading) arrowStream() error {
	at, size, done, err := t.in.at()
	if err != nil {
		return err
	}
	defer done()
	sound, rows, broken := checkStream(at, size)
	t.expect = rows
	if sound == 0 && broken != nil {
		return broken
	}
	r, err := ipc.NewReader(io.NewSectionReader(at, 0, sound), ipc.WithAllocator(t.limit))
	if err != nil {
		return err
	}
	defer r.Release()
	err = t.batches(r.Schema(), func() (arrow.Record, error) {
		rec, err := r.Read()
		if err == io.EOF && broken != nil {
			err = broken
		}
		return rec, err
	})
	return err
}

// batches reads batch after batch. One that is damaged or cut off ends the
// reading: the whole batches before it are kept, and a finding says so.
func (t *tableReading) batches(s *arrow.Schema, next func() (arrow.Record, error)) error {
	for first := true; ; first = false {
		if err := t.ctx.Err(); err != nil {
			return err
		}
		var rec arrow.Record
		err := guard(t.in.name, func() (err error) {
			rec, err = next()
			return err
		})
		if err == io.EOF {
			break
		}
		if err == nil {
			err = guard(t.in.name, func() error { return t.batch(s, rec, first) })
		}
		if n := t.limit.made.Load(); n > 32<<20 {
			t.limit.made.Add(-n)
			runtime.GC() // the batches before are garbage; a large lot must not stand in memory twice
		}
		var e *Error
		switch {
		case err == nil:
			continue
		case first || t.c == nil || t.c.n == 0:
			return err
		case errors.As(err, &e) && e.Line < 0:
			return err
		}
		what := err.Error()
		if errors.As(err, &e) {
			what = e.What
		}
		t.d.err = &Error{File: t.in.name, What: "the " + kindNames[t.in.kind] + " is damaged or cut short: " + what, Remedy: "fetch or export the file again"}
		break
	}
	if t.c == nil || t.c.n == 0 {
		return t.noRows()
	}
	return nil
}

func (t *tableReading) batch(s *arrow.Schema, rec arrow.Record, first bool) error {
	n := int(rec.NumRows())
	if first {
		at := make([]func(int) string, rec.NumCols())
		for i := range at {
			if isNested(s.Field(i).Type) {
				continue
			}
			f, err := cellTexts(rec.Column(i))
			if err != nil {
				return err
			}
			at[i] = func(row int) string {
				if rec.Column(i).IsNull(row) {
					return ""
				}
				return oneText(f(row))
			}
		}
		if err := t.start(s, min(n, sampleRows), func(field, row int) string { return at[field](row) }); err != nil {
			return err
		}
	}
	if n < 0 || n > 1<<31-1-t.c.n {
		return fmt.Errorf("a batch says that it holds %d rows", n)
	}
	if first && t.expect > int64(n) && t.expect < min(8*t.in.size, 1<<31) {
		_ = t.makeRoom(int(t.expect)) // only a claim: what is too much shows when the rows come
	}
	if want := t.c.n + n; want > t.room {
		if err := t.makeRoom(max(want, t.room+t.room/2)); err != nil {
			if err := t.makeRoom(want); err != nil {
				return err
			}
		}
	}
	if err := t.record(rec, t.c.n); err != nil {
		return err
	}
	t.c.n += n
	return nil
}
