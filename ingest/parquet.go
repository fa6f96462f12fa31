package ingest

import (
	"errors"
	"fmt"
	"sync/atomic"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/ipc"
	"github.com/apache/arrow/go/v17/arrow/memory"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/apache/arrow/go/v17/parquet/pqarrow"
	"golang.org/x/sync/errgroup"

	"io"
)

// parquet reads row groups and columns in parallel: a task is one column of one
// row group, for text all of a column, as its dictionary is that of the file.
func (t *tableReading) parquet() error {
	at, size, done, err := t.in.at()
	if err != nil {
		return err
	}
	defer done()
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
	read := func(group, field int, do func(arrow.Array, int) error) error {
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
	task := func(groups []int, field int) {
		g.Go(func() error {
			return guard(t.in.name, func() error {
				for _, group := range groups {
					if err := ctx.Err(); err != nil {
						return err
					}
					if err := read(group, field, func(a arrow.Array, row int) error { return t.column(field, a, row) }); err != nil {
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
		switch f.kind {
		case skipField:
		case textField:
			task(groups, i)
		default:
			for _, group := range groups {
				task([]int{group}, i)
			}
		}
	}
	return g.Wait()
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

// arrowStream reads an Arrow IPC stream.
func (t *tableReading) arrowStream(from io.Reader) error {
	r, err := ipc.NewReader(from, ipc.WithAllocator(t.limit))
	if err != nil {
		return err
	}
	defer r.Release()
	return t.batches(r.Schema(), func() (arrow.Record, error) {
		rec, err := r.Read()
		return rec, err
	})
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

// limitAllocator bounds the memory that a file can make the libraries take, as a
// length in a damaged file may claim anything.
type limitAllocator struct {
	memory.Allocator
	file string
	most int64
	used atomic.Int64
}

func newLimit(in *input) *limitAllocator {
	return &limitAllocator{Allocator: memory.NewGoAllocator(), file: in.name, most: unpackLimit(in.size)}
}

func (l *limitAllocator) take(n int) {
	if n < 0 || l.used.Add(int64(n)) > l.most {
		l.used.Add(-int64(n))
		panic(&Error{File: l.file, What: fmt.Sprintf("unpacks to more than %d times its size, or is damaged; it is not read", unpackRatio), Remedy: "fetch or export the file again"})
	}
}

func (l *limitAllocator) Allocate(n int) []byte {
	l.take(n)
	return l.Allocator.Allocate(n)
}

func (l *limitAllocator) Reallocate(n int, b []byte) []byte {
	if n > len(b) {
		l.take(n - len(b))
	} else {
		l.used.Add(int64(n - len(b)))
	}
	return l.Allocator.Reallocate(n, b)
}

func (l *limitAllocator) Free(b []byte) {
	l.used.Add(-int64(len(b)))
	l.Allocator.Free(b)
}
