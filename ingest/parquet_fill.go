package ingest

import (
	"encoding/binary"
	"fmt"
	"math"
	"strings"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/parquet"
	"github.com/apache/arrow/go/v17/parquet/file"
)

// The columns that lots are made of go from the pages of a file to their place in
// the chunk with no array in between: float64, int32, flags, and texts, in the
// packings that writers use for them. All others go by way of the library.

// direct says whether a field's column can be taken so from every row group.
func (t *tableReading) direct(pf *file.Reader, groups []int, field, leaf int) bool {
	if leaf < 0 || t.opt.careful {
		return false
	}
	typ, want := t.fields[field].Type, parquet.Types.Double
	switch t.layout.fields[field].kind {
	case valueField:
		if typ.ID() != arrow.FLOAT64 {
			return false
		}
	case intField:
		if want = parquet.Types.Int32; typ.ID() != arrow.INT32 {
			return false
		}
	case passField:
		if want = parquet.Types.Boolean; typ.ID() != arrow.BOOL {
			return false
		}
	case textField:
		if d, ok := typ.(*arrow.DictionaryType); ok {
			typ = d.ValueType
		}
		if want = parquet.Types.ByteArray; !arrow.IsBaseBinary(typ.ID()) {
			return false
		}
	default:
		return false
	}
	for _, g := range groups {
		meta, err := pf.MetaData().RowGroup(g).ColumnChunk(leaf)
		if err != nil || meta.Type() != want {
			return false
		}
		for _, e := range meta.Encodings() {
			switch e {
			case parquet.Encodings.Plain, parquet.Encodings.PlainDict, parquet.Encodings.RLEDict, parquet.Encodings.RLE, parquet.Encodings.BitPacked:
			default:
				return false
			}
		}
	}
	return true
}

// fill reads a column of a row group into rows lo and on.
func (t *tableReading) fill(w *pageWalk, group *file.RowGroupReader, leaf, field, lo int) error {
	f := t.layout.fields[field]
	k := cells{at: lo}
	err := w.chunk(group, leaf, func(c *pageChunk, p *page) error {
		from, to := k.at, k.at+p.n
		defer func() { k.at = to }()
		switch f.kind {
		case valueField:
			return c.doubles(p, t.c.values[f.slot][from:to], &k)
		case intField:
			return c.wholes(p, t.c.ints[f.slot][from:to])
		case passField:
			return c.flags(p, t.c.pass[from:to])
		}
		return c.texts(p, t.c.text[f.slot].codes[from:to], &t.text[field])
	})
	t.count(field, &k)
	return err
}

// fixed puts values of a fixed width in their rows; of reads one of them, dict holds
// those of the dictionary.
func fixed[T any](p *page, dict []T, of func([]byte) T, width int, missing T, to []T) error {
	switch {
	case p.index != nil:
		to := to[:len(p.index)]
		for i, at := range p.index {
			if int(at) >= len(dict) {
				return errRuns
			}
			to[i] = dict[at]
		}
	case p.coding == parquet.Encodings.Plain:
		b := p.values[:width*p.present]
		for i := range to[:p.present] {
			to[i] = of(b[width*i:])
		}
	default:
		return fmt.Errorf("its packing (%s) is not one of numbers", p.coding)
	}
	if p.levels != nil {
		spread(to, p.levels, p.present, missing)
	}
	return nil
}

// spread moves values that were read without the nulls between them to their
// rows, from the last on.
func spread[T any](to []T, levels []uint32, values int, missing T) {
	for i := len(to) - 1; i >= 0; i-- {
		if levels[i] == 0 {
			to[i] = missing
			continue
		}
		values--
		to[i] = to[values]
	}
}

func doubleOf(b []byte) float64 { return math.Float64frombits(binary.LittleEndian.Uint64(b)) }
func wholeOf(b []byte) int32    { return int32(binary.LittleEndian.Uint32(b)) }

// doubles reads a page of float64. Whether some are to be looked at closer is seen
// in the dictionary, where all are in it.
func (c *pageChunk) doubles(p *page, to []float64, k *cells) error {
	look := p.index == nil
	if p.index != nil && c.numbers == nil {
		c.numbers = make([]float64, c.dictN)
		for i := range c.numbers {
			c.numbers[i] = doubleOf(c.dict[8*i:])
			c.odd = c.odd || c.numbers[i]-c.numbers[i] != 0
		}
	}
	if err := fixed(p, c.numbers, doubleOf, 8, math.NaN(), to); err != nil {
		return err
	}
	if look || c.odd {
		k.infinite(to)
	}
	return nil
}

// wholes reads a page of int32.
func (c *pageChunk) wholes(p *page, to []int32) error {
	if p.index != nil && c.whole == nil {
		c.whole = make([]int32, c.dictN)
		for i := range c.whole {
			c.whole[i] = wholeOf(c.dict[4*i:])
		}
	}
	return fixed(p, c.whole, wholeOf, 4, Missing, to)
}

// flags reads a page of pass flags.
func (c *pageChunk) flags(p *page, to []int8) error {
	switch p.coding {
	case parquet.Encodings.Plain:
		for i := range to[:p.present] {
			to[i] = int8(p.values[i>>3] >> (i & 7) & 1)
		}
	case parquet.Encodings.RLE:
		for i := range to[:p.present] {
			to[i] = int8(p.index[i] & 1)
		}
	default:
		return fmt.Errorf("its packing (%s) is not one of flags", p.coding)
	}
	if p.levels != nil {
		spread(to, p.levels, p.present, -1)
	}
	return nil
}

// texts reads a page of texts into codes of the file's dictionary, to which only
// those are added that some row has, in the order of the rows.
func (c *pageChunk) texts(p *page, to []int32, g *globalText) error {
	switch {
	case p.index != nil:
		if err := c.dictTexts(); err != nil {
			return err
		}
		for i, at := range p.index {
			if int(at) >= len(c.codes) {
				return errRuns
			}
			if c.codes[at] == newText {
				text, _, _ := plainText(c.dict[c.starts[at]:])
				c.codes[at] = textCode(text, g)
			}
			to[i] = c.codes[at]
		}
	case p.coding == parquet.Encodings.Plain:
		b := p.values
		var last []byte
		code := int32(-1)
		for i := range to[:p.present] {
			text, rest, err := plainText(b)
			if err != nil {
				return err
			}
			if b = rest; string(text) != string(last) {
				last, code = text, textCode(text, g)
			}
			to[i] = code
		}
	default:
		return fmt.Errorf("its packing (%s) is not one of texts", p.coding)
	}
	if p.levels != nil {
		spread(to, p.levels, p.present, -1)
	}
	return nil
}

// newText stands for the code of a text that no row has had yet.
const newText = -2

// dictTexts finds the texts of the dictionary of a chunk.
func (c *pageChunk) dictTexts() error {
	if c.codes != nil {
		return nil
	}
	c.starts, c.codes = make([]uint32, c.dictN), make([]int32, c.dictN)
	b := c.dict
	for i := range c.starts {
		c.starts[i], c.codes[i] = uint32(len(c.dict)-len(b)), newText
		_, rest, err := plainText(b)
		if err != nil {
			return err
		}
		b = rest
	}
	return nil
}

// plainText cuts a text off, which stands behind its length.
func plainText(b []byte) (text, rest []byte, err error) {
	if len(b) < 4 {
		return nil, nil, errRuns
	}
	n := int64(binary.LittleEndian.Uint32(b))
	if n > int64(len(b)-4) {
		return nil, nil, errRuns
	}
	return b[4 : 4+n], b[4+n:], nil
}

func textCode(text []byte, g *globalText) int32 {
	if s := oneText(string(text)); s != "" {
		return g.code(strings.Clone(s))
	}
	return -1
}
