package ingest

import (
	"unsafe"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"
	"github.com/apache/arrow/go/v17/arrow/memory"
)

// columns are a lot's Arrow columns, each built over a Go slice without a copy.
// A column that the file does not have is nil. Missing values are NaN or
// Missing in the buffers themselves, so that a view of a column needs no mask;
// the validity bitmaps are made where a file format wants them.
type columns struct {
	n          int
	x, y       *array.Int32
	site       *array.Int32
	touchdown  *array.Int32
	hardBin    *array.Int32
	softBin    *array.Int32
	pass       *array.Int8
	values     []*array.Float64 // by test
	censor     []*array.Int8    // by test; nil: nothing is censored
	attributes []dieAttribute
}

// dieAttribute is a text column that differs within a wafer.
type dieAttribute struct {
	name   string
	codes  *array.Int32 // -1: none
	labels []string
}

// bytesOf is the slice's memory as bytes.
func bytesOf[T any](s []T) []byte {
	if len(s) == 0 {
		return nil
	}
	return unsafe.Slice((*byte)(unsafe.Pointer(unsafe.SliceData(s))), len(s)*int(unsafe.Sizeof(s[0])))
}

func arrowData[T any](t arrow.DataType, s []T) *array.Data {
	return array.NewData(t, len(s), []*memory.Buffer{nil, memory.NewBufferBytes(bytesOf(s))}, nil, 0, 0)
}

func float64Column(s []float64) *array.Float64 {
	return array.NewFloat64Data(arrowData(arrow.PrimitiveTypes.Float64, s))
}

// int32Column wraps s; nil stays nil, which is how an absent column is told.
func int32Column(s []int32) *array.Int32 {
	if s == nil {
		return nil
	}
	return array.NewInt32Data(arrowData(arrow.PrimitiveTypes.Int32, s))
}

func int8Column(s []int8) *array.Int8 {
	if s == nil {
		return nil
	}
	return array.NewInt8Data(arrowData(arrow.PrimitiveTypes.Int8, s))
}

func view32(a *array.Int32) []int32 {
	if a == nil {
		return nil
	}
	return a.Int32Values()
}

func view8(a *array.Int8) []int8 {
	if a == nil {
		return nil
	}
	return a.Int8Values()
}

// Bytes is the memory of the lot's columns.
func (l *Lot) Bytes() int64 {
	c := &l.cols
	b := int64(0)
	for _, a := range []*array.Int32{c.x, c.y, c.site, c.touchdown, c.hardBin, c.softBin} {
		if a != nil {
			b += 4 * int64(a.Len())
		}
	}
	if c.pass != nil {
		b += int64(c.pass.Len())
	}
	for _, v := range c.values {
		b += 8 * int64(v.Len())
	}
	for _, v := range c.censor {
		if v != nil {
			b += int64(v.Len())
		}
	}
	for _, a := range c.attributes {
		b += 4 * int64(a.codes.Len())
	}
	return b
}
