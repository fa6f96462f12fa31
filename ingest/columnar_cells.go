package ingest

import (
	"errors"
	"fmt"
	"math"
	"strings"

	"github.com/apache/arrow/go/v17/arrow"
	"github.com/apache/arrow/go/v17/arrow/array"

	"kneepoint/config"
)

// cells reads one Arrow array as numbers, whole numbers, flags or texts.
type cells struct {
	a    arrow.Array
	at   int         // row of the file of the first cell
	unit config.Unit // of the column, for cells that give their own
	odd  map[status]*oddCells
}

func (k *cells) count(st status, i int, text string) {
	o := k.odd[st]
	if o == nil {
		if k.odd == nil {
			k.odd = map[status]*oddCells{}
		}
		o = &oddCells{first: place{line: k.at + i + 1, text: text}}
		k.odd[st] = o
	}
	o.n++
}

// floats reads numbers. Infinite ones and texts that are bounds or no numbers are odd; a
// float32 is read as its shortest decimal, see readSTDF.
func (k *cells) floats(to []float64) error {
	switch a := k.a.(type) {
	case *array.Float64:
		copy(to, a.Float64Values())
	case *array.Float32:
		for i, v := range a.Float32Values() {
			to[i] = float64(v)
		}
	case *array.Int32:
		for i, v := range a.Int32Values() {
			to[i] = float64(v)
		}
	case *array.Int64:
		for i, v := range a.Int64Values() {
			to[i] = float64(v)
		}
	default:
		return k.otherFloats(to)
	}
	if k.a.NullN() > 0 {
		for i := range to {
			if k.a.IsNull(i) {
				to[i] = math.NaN()
			}
		}
	}
	k.infinite(to)
	if _, ok := k.a.(*array.Float32); ok {
		decimals(to, make([]decimalOf, 1<<12))
	}
	return nil
}

// infinite makes bounds of infinite values, as text has them, and makes all NaN
// the same.
func (k *cells) infinite(to []float64) {
	for i, v := range to {
		if v-v == 0 {
			continue
		}
		if to[i] = math.NaN(); math.IsInf(v, 0) {
			st := infinityIs(v)
			k.count(st, i, fmt.Sprint(v))
			to[i] = oddNaN[st]
		}
	}
}

// infinityIs tells what an infinite reading says: it is beyond the range.
func infinityIs(v float64) status {
	if v < 0 {
		return cellUnder
	}
	return cellOver
}

func (k *cells) otherFloats(to []float64) error {
	at, err := cellTexts(k.a)
	if err != nil {
		return err
	}
	for i := range to {
		if k.a.IsNull(i) {
			to[i] = math.NaN()
			continue
		}
		t := strings.TrimSpace(at(i))
		if b, ok := k.a.(*array.Boolean); ok {
			t = "0"
			if b.Value(i) {
				t = "1"
			}
		}
		v, st := parseNumber([]byte(t), '.')
		if st == cellBad {
			v, st = quantity(t, '.', k.unit)
		}
		if st != cellNumber && st != cellEmpty {
			k.count(st, i, t)
			if st != cellBound {
				v = oddNaN[st]
			}
		}
		to[i] = v
	}
	return nil
}

// ints reads whole numbers.
func (k *cells) ints(to []int32) error {
	if a, ok := k.a.(*array.Int32); ok {
		copy(to, a.Int32Values())
		if a.NullN() > 0 {
			for i := range to {
				if a.IsNull(i) {
					to[i] = Missing
				}
			}
		}
		return nil
	}
	v := make([]float64, len(to))
	if err := k.floats(v); err != nil {
		return err
	}
	for _, st := range []status{cellMissing, cellOver, cellUnder, cellBound} {
		delete(k.odd, st)
	}
	for i, x := range v {
		switch n, st := wholeNumber(x); {
		case x != x:
			to[i] = Missing
		case st != cellNumber:
			k.count(cellBad, i, shortDecimal(x))
			to[i] = Missing
		default:
			to[i] = n
		}
	}
	return nil
}

// passes reads pass flags.
func (k *cells) passes(to []int8) error {
	if a, ok := k.a.(*array.Boolean); ok {
		for i := range to {
			switch {
			case a.IsNull(i):
				to[i] = -1
			case a.Value(i):
				to[i] = 1
			default:
				to[i] = 0
			}
		}
		return nil
	}
	at, err := cellTexts(k.a)
	if err != nil {
		return err
	}
	for i := range to {
		to[i] = -1
		if k.a.IsNull(i) {
			continue
		}
		t := strings.TrimSpace(at(i))
		if to[i] = passFlag([]byte(t)); to[i] < 0 && t != "" && word([]byte(t)) != cellMissing {
			k.count(cellBad, i, t)
		}
	}
	return nil
}

// texts reads texts into codes of the file's dictionary.
func (k *cells) texts(to []int32, g *globalText) error {
	if d, ok := k.a.(*array.Dictionary); ok {
		at, err := cellTexts(d.Dictionary())
		if err != nil {
			return err
		}
		n := d.Dictionary().Len()
		code := make([]int32, n)
		for i := range code {
			code[i] = -2 // only what is used goes into the dictionary
		}
		for i := range to {
			if to[i] = -1; d.IsNull(i) {
				continue
			}
			x := d.GetValueIndex(i)
			if x < 0 || x >= n {
				return errors.New("a text points outside its dictionary")
			}
			if code[x] == -2 {
				code[x] = -1
				if t := oneText(at(x)); t != "" && !d.Dictionary().IsNull(x) {
					code[x] = g.code(t)
				}
			}
			to[i] = code[x]
		}
		return nil
	}
	at, err := cellTexts(k.a)
	if err != nil {
		return err
	}
	last, code := "", int32(-1)
	for i := range to {
		if to[i] = -1; k.a.IsNull(i) {
			continue
		}
		t := at(i)
		if t != last {
			if last, code = t, -1; oneText(t) != "" {
				code = g.code(strings.Clone(oneText(t)))
			}
		}
		to[i] = code
	}
	return nil
}

// oneText is a text without blanks around it, as cells of delimited text are.
func oneText(t string) string { return cellText([]byte(t)) }

// cellTexts gives the cells of an array as text, as they would stand in a CSV file.
func cellTexts(a arrow.Array) (func(i int) string, error) {
	switch a := a.(type) {
	case *array.String:
		return a.Value, nil
	case *array.LargeString:
		return a.Value, nil
	case *array.Binary:
		return a.ValueString, nil
	case *array.LargeBinary:
		return a.ValueString, nil
	case *array.Float64:
		return func(i int) string { return shortDecimal(a.Value(i)) }, nil
	case *array.Float32:
		return func(i int) string {
			one := []float64{float64(a.Value(i))}
			decimals(one, make([]decimalOf, 1<<12))
			return shortDecimal(one[0])
		}, nil
	case *array.Dictionary:
		at, err := cellTexts(a.Dictionary())
		if err != nil {
			return nil, err
		}
		return func(i int) string {
			x := a.GetValueIndex(i)
			if x < 0 || x >= a.Dictionary().Len() || a.Dictionary().IsNull(x) {
				return ""
			}
			return at(x)
		}, nil
	case *array.Timestamp:
		to, err := a.DataType().(*arrow.TimestampType).GetToTimeFunc()
		if err != nil {
			return nil, err
		}
		return func(i int) string {
			return strings.TrimSuffix(to(a.Value(i)).Format("2006-01-02 15:04:05.999999999"), " 00:00:00")
		}, nil
	case *array.Date32:
		return func(i int) string { return a.Value(i).FormattedString() }, nil
	case *array.Date64:
		return func(i int) string { return a.Value(i).FormattedString() }, nil
	case *array.Null:
		return func(int) string { return "" }, nil
	}
	return a.ValueStr, nil
}
