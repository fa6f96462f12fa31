package ingest

import (
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/compress"
	"github.com/apache/arrow/go/v17/parquet/file"
	"github.com/klauspost/compress/snappy"
	"github.com/klauspost/compress/zstd"
)

// The library for Parquet trusts the pages of a file: it has loops that need levels
// for all the rows that a page claims, and makes room for whatever index, length or
// number a page gives, which may be more than any machine has. Neither is a panic
// that could be caught. So each page is walked here first: what it says of itself
// must fit into its bytes, and into what a file of this size may unpack to. Most
// columns are then taken from here straight into their place, see fill.

// pageWalk walks the pages of column chunks; it keeps its room from one to the
// next, and is for one goroutine.
type pageWalk struct {
	from   io.ReaderAt
	size   int64
	limit  *limitAllocator
	raw    []byte
	plain  []byte
	levels []uint32
	index  []uint32
	dict   []byte
	zstd   *zstd.Decoder
}

// pageChunk is the chunk that is walked.
type pageChunk struct {
	codec    compress.Compression
	kind     parquet.Type
	width    int // of a value of a fixed width in bytes, 0 other
	nullable bool
	dict     []byte // values of the dictionary, packed plainly
	dictN    int
	hasDict  bool

	// What fill makes of the dictionary.
	numbers []float64
	odd     bool // some number is infinite or NaN
	whole   []int32
	starts  []uint32 // of texts
	codes   []int32  // of texts, in the file's dictionary
}

// page is a data page, unpacked.
type page struct {
	n       int      // rows
	levels  []uint32 // 1: has a value; nil: all have
	present int
	index   []uint32 // into the dictionary, not yet checked, or flags; nil: values are plain or packed otherwise
	coding  parquet.Encoding
	values  []byte
}

type pageHeader struct {
	kind, unpacked, packed int
	n, coding, levels      int
	levelBytes, repBytes   int
	compressed             bool
}

// header reads the header of a page.
func (h *pageHeader) read(b []byte) (rest []byte, err error) {
	t := thrift{b: b}
	*h = pageHeader{compressed: true, levels: int(parquet.Encodings.RLE)}
	fill := func(at map[int]*int) func(int, byte) bool {
		return func(id int, kind byte) bool {
			if p := at[id]; p != nil && kind == thriftI32 {
				*p = t.zigzag()
				return true
			}
			if id == 7 && at[6] == &h.repBytes && kind <= 2 {
				h.compressed = kind == thriftTrue
				return true
			}
			return false
		}
	}
	err = inBounds(func() error {
		outer := fill(map[int]*int{1: &h.kind, 2: &h.unpacked, 3: &h.packed})
		t.fields(8, func(id int, kind byte) bool {
			if kind != thriftPart {
				return outer(id, kind)
			}
			switch id {
			case 5:
				t.fields(8, fill(map[int]*int{1: &h.n, 2: &h.coding, 3: &h.levels}))
			case 7:
				t.fields(8, fill(map[int]*int{1: &h.n, 2: &h.coding}))
			case 8:
				t.fields(8, fill(map[int]*int{1: &h.n, 4: &h.coding, 5: &h.levelBytes, 6: &h.repBytes}))
			default:
				return false
			}
			return true
		})
		return nil
	})
	if err == nil && (h.n < 0 || h.packed < 0 || h.unpacked < 0 || h.levelBytes < 0 || h.repBytes < 0 || h.packed > len(b)-t.at) {
		err = errClaims
	}
	if err != nil {
		return nil, err
	}
	return b[t.at:], nil
}

// Kinds of pages.
const (
	pageData   = 0
	pageDict   = 2
	pageDataV2 = 3
)

// chunk walks a column of a row group; visit, when there is one, gets each page,
// whose contents hold until the next.
func (w *pageWalk) chunk(group *file.RowGroupReader, leaf int, visit func(*pageChunk, *page) error) error {
	meta, err := group.MetaData().ColumnChunk(leaf)
	if err != nil {
		return err
	}
	if meta.CryptoMetadata() != nil {
		return errors.New("it is encrypted")
	}
	start, size := meta.DataPageOffset(), meta.TotalCompressedSize()
	if meta.HasDictionaryPage() && meta.DictionaryPageOffset() > 0 {
		start = min(start, meta.DictionaryPageOffset())
	}
	if start < 0 || size < 0 || start > w.size || size > w.size-start {
		return errClaims
	}
	const oldHeader = 100 // of the dictionary, which early writers did not count
	w.raw = roomFor(w.raw, int(min(size+oldHeader, w.size-start)))
	if _, err := w.from.ReadAt(w.raw, start); err != nil {
		return err
	}
	c := &pageChunk{codec: meta.Compression(), kind: meta.Type()}
	return w.pages(c, group, leaf, visit)
}

func (w *pageWalk) pages(c *pageChunk, group *file.RowGroupReader, leaf int, visit func(*pageChunk, *page) error) error {
	meta, _ := group.MetaData().ColumnChunk(leaf)
	desc := group.MetaData().Schema.Column(leaf)
	if desc.MaxRepetitionLevel() > 0 || desc.MaxDefinitionLevel() > 1 || desc.PhysicalType() != c.kind {
		return errors.New("the schema contradicts itself")
	}
	c.nullable = desc.MaxDefinitionLevel() == 1
	switch c.kind {
	case parquet.Types.Int32, parquet.Types.Float:
		c.width = 4
	case parquet.Types.Int64, parquet.Types.Double:
		c.width = 8
	case parquet.Types.Int96:
		c.width = 12
	case parquet.Types.FixedLenByteArray:
		if c.width = desc.TypeLength(); c.width <= 0 || c.width > 1<<16 {
			return errClaims
		}
	}
	left := group.NumRows()
	if meta.NumValues() != left {
		return fmt.Errorf("it says that it holds %d values in %d rows", meta.NumValues(), left)
	}
	b := w.raw
	var h pageHeader
	for left > 0 {
		rest, err := h.read(b)
		if err != nil {
			return err
		}
		body := rest[:h.packed]
		b = rest[h.packed:]
		if h.kind == pageDict {
			if err := w.dictionary(c, &h, body); err != nil {
				return err
			}
			continue
		}
		if h.kind != pageData && h.kind != pageDataV2 {
			return fmt.Errorf("a page of kind %d is not read", h.kind)
		}
		if h.n == 0 || int64(h.n) > left {
			return errClaims
		}
		left -= int64(h.n)
		p, err := w.page(c, &h, body)
		if err != nil {
			return err
		}
		if err := w.check(c, p); err != nil {
			return err
		}
		if visit == nil {
			err = p.inDict(c)
		} else {
			err = visit(c, p)
		}
		if err != nil {
			return err
		}
	}
	return nil
}

// roomFor makes a slice of n from the room of another where it can.
func roomFor[T any](s []T, n int) []T {
	if cap(s) < n {
		return make([]T, n)
	}
	return s[:n]
}

// dictionary keeps the dictionary page of a chunk.
func (w *pageWalk) dictionary(c *pageChunk, h *pageHeader, body []byte) error {
	if c.hasDict {
		return errors.New("it has two dictionaries")
	}
	plain, err := w.unpack(c.codec, body, h.unpacked)
	if err != nil {
		return err
	}
	if least := max(c.width, 1); h.n > len(plain)/least || c.width == 0 && c.kind == parquet.Types.ByteArray && h.n > len(plain)/4 {
		return errClaims
	}
	w.dict = append(w.dict[:0], plain...)
	c.dict, c.dictN, c.hasDict = w.dict, h.n, true
	return nil
}

// page unpacks a data page and reads its levels.
func (w *pageWalk) page(c *pageChunk, h *pageHeader, body []byte) (*page, error) {
	p := &page{n: h.n, present: h.n, coding: parquet.Encoding(h.coding)}
	var levels []byte
	if h.kind == pageDataV2 {
		// Levels stand before the values and are never packed.
		ahead := h.repBytes + h.levelBytes
		if ahead > len(body) || ahead > h.unpacked {
			return nil, errClaims
		}
		levels = body[h.repBytes:ahead]
		p.values = body[ahead:]
		if h.compressed {
			var err error
			if p.values, err = w.unpack(c.codec, p.values, h.unpacked-ahead); err != nil {
				return nil, err
			}
		} else if len(body) != h.unpacked {
			return nil, errClaims
		}
	} else {
		plain, err := w.unpack(c.codec, body, h.unpacked)
		if err != nil {
			return nil, err
		}
		p.values = plain
		if c.nullable {
			if parquet.Encoding(h.levels) != parquet.Encodings.RLE {
				return nil, errors.New("its nulls are packed in a way that is no longer used")
			}
			if len(plain) < 4 || int64(binary.LittleEndian.Uint32(plain)) > int64(len(plain)-4) {
				return nil, errClaims
			}
			n := int(binary.LittleEndian.Uint32(plain))
			levels, p.values = plain[4:4+n], plain[4+n:]
		}
	}
	if !c.nullable || allOnes(levels, p.n) {
		return p, nil
	}
	w.levels = roomFor(w.levels, p.n)
	p.levels = w.levels
	if err := runs(levels, 1, p.levels); err != nil {
		return nil, err
	}
	p.present = 0
	for _, l := range p.levels {
		if l > 1 {
			return nil, errClaims
		}
		p.present += int(l)
	}
	return p, nil
}

// unpack unpacks what must be of a size; it holds until the next time.
func (w *pageWalk) unpack(codec compress.Compression, b []byte, size int) ([]byte, error) {
	w.limit.unpack(size)
	if codec == compress.Codecs.Uncompressed {
		if len(b) != size {
			return nil, errClaims
		}
		return b, nil
	}
	if size == 0 && len(b) == 0 {
		return nil, nil
	}
	w.plain = roomFor(w.plain, size)
	to := w.plain
	var err error
	switch codec {
	case compress.Codecs.Snappy:
		if n, err := snappy.DecodedLen(b); err != nil || n != size {
			return nil, errClaims
		}
		to, err = snappy.Decode(to, b)
	case compress.Codecs.Zstd:
		if w.zstd == nil {
			// The library's own decoder has no bound; what is more than the page says
			// is an error here, before that sees it.
			w.zstd, err = zstd.NewReader(nil, zstd.WithDecoderConcurrency(1), zstd.WithDecodeAllCapLimit(true), zstd.WithDecoderMaxWindow(zstdWindowMost))
			if err != nil {
				return nil, err
			}
		}
		to, err = w.zstd.DecodeAll(b, to[:0:size])
	default:
		var c compress.Codec
		if c, err = compress.GetCodec(codec); err == nil {
			to = c.Decode(to, b)
		}
	}
	if err == nil && len(to) != size {
		err = errClaims
	}
	return to, err
}

// check looks whether the values of a page are there.
func (w *pageWalk) check(c *pageChunk, p *page) error {
	fits := func(ok bool) error {
		if !ok {
			return errRuns
		}
		return nil
	}
	switch p.coding {
	case parquet.Encodings.Plain:
		switch {
		case c.kind == parquet.Types.Boolean:
			return fits((p.present+7)/8 <= len(p.values))
		case c.kind == parquet.Types.ByteArray:
			return fits(p.present <= len(p.values)/4)
		}
		return fits(p.present <= len(p.values)/c.width)
	case parquet.Encodings.PlainDict, parquet.Encodings.RLEDict:
		if !c.hasDict {
			return errors.New("its dictionary is missing")
		}
		w.index = roomFor(w.index, p.present)
		p.index = w.index
		if p.present == 0 {
			return nil
		}
		if len(p.values) == 0 {
			return errRuns
		}
		return runs(p.values[1:], int(p.values[0]), p.index)
	case parquet.Encodings.RLE: // flags
		if c.kind != parquet.Types.Boolean || len(p.values) < 4 {
			return errClaims
		}
		w.index = roomFor(w.index, p.present)
		p.index = w.index
		return runs(p.values[4:], 1, p.index)
	case parquet.Encodings.DeltaBinaryPacked:
		n, _, err := deltas(p.values, p.n, func(int64) {})
		if err == nil && n < p.present {
			err = errRuns
		}
		return err
	case parquet.Encodings.DeltaLengthByteArray, parquet.Encodings.DeltaByteArray:
		return w.lengths(p)
	}
	return fmt.Errorf("its packing (%s) is not read", p.coding)
}

// inDict checks that what a page points to is in the dictionary, for those who do
// not look themselves.
func (p *page) inDict(c *pageChunk) error {
	if c.kind == parquet.Types.Boolean {
		return nil
	}
	most := -1
	for _, i := range p.index {
		most = max(most, int(i))
	}
	if most >= c.dictN {
		return errRuns
	}
	return nil
}

// lengths checks texts that are packed by their lengths: as texts may share their
// beginnings, few bytes can make very long ones.
func (w *pageWalk) lengths(p *page) error {
	b, total := p.values, 0
	rounds := 1
	if p.coding == parquet.Encodings.DeltaByteArray {
		rounds = 2
	}
	own := int64(0)
	for range rounds {
		own = 0
		n, rest, err := deltas(b, p.n, func(v int64) {
			if v < 0 || v > math.MaxInt32 {
				v = math.MaxInt32
			}
			own += v
		})
		if err != nil {
			return err
		}
		if n < p.present || own > w.limit.most {
			return errClaims
		}
		b = rest
		total += int(own)
	}
	if own > int64(len(b)) {
		return errRuns
	}
	w.limit.unpack(total)
	return nil
}
