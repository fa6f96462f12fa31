package ingest

import (
	"encoding/binary"
	"errors"
)

// What the pages of a Parquet file are packed with, as the open specification of
// the format has it (parquet-format, Encodings.md; from memory, held in tests by
// what two other writers make). Nothing here takes more room than its caller gives,
// and each of them ends, whatever the bytes.

var errRuns = errors.New("a page ends before its values")

// uvarint reads a number of 7 bits a byte.
func uvarint(b []byte) (v uint64, rest []byte, err error) {
	v, n := binary.Uvarint(b)
	if n <= 0 {
		return 0, nil, errRuns
	}
	return v, b[n:], nil
}

// runs decodes the hybrid of repeated and bit-packed numbers.
func runs(b []byte, width int, to []uint32) error {
	if width < 0 || width > 32 {
		return errClaims
	}
	for len(to) > 0 {
		head, rest, err := uvarint(b)
		if err != nil {
			return err
		}
		b = rest
		count := head >> 1
		if count == 0 || count > 1<<31-1 {
			return errClaims
		}
		if head&1 == 0 {
			size := (width + 7) / 8
			if len(b) < size {
				return errRuns
			}
			v := uint32(0)
			for i := range size {
				v |= uint32(b[i]) << (8 * i)
			}
			b = b[size:]
			n := min(int(count), len(to))
			for i := range to[:n] {
				to[i] = v
			}
			to = to[n:]
			continue
		}
		if count > 1<<31/8-1 {
			return errClaims
		}
		n := min(8*int(count), len(to))
		if len(b) < (n*width+7)/8 {
			return errRuns
		}
		unpackBits(b, width, to[:n])
		to = to[n:]
		b = b[min(int(count)*width, len(b)):]
	}
	return nil
}

// allOnes says whether n numbers of one bit are all one, without unpacking them:
// the levels of a column with no nulls.
func allOnes(b []byte, n int) bool {
	for n > 0 {
		head, rest, err := uvarint(b)
		if err != nil || head&1 != 0 || head>>1 == 0 || len(rest) == 0 || rest[0] != 1 {
			return false
		}
		n -= int(min(head>>1, uint64(n)))
		b = rest[1:]
	}
	return true
}

// unpackBits reads numbers of a width of at most 32 bits, lowest bits first.
func unpackBits(b []byte, width int, to []uint32) {
	mask := uint64(1)<<width - 1
	i, bit := 0, 0
	if 4*width <= 57 { // four are in eight bytes, wherever the first bit is
		for ; i+4 <= len(to) && bit>>3+8 <= len(b); i += 4 {
			v := binary.LittleEndian.Uint64(b[bit>>3:]) >> (bit & 7)
			four := to[i : i+4 : i+4]
			four[0] = uint32(v & mask)
			four[1] = uint32(v >> width & mask)
			four[2] = uint32(v >> (2 * width) & mask)
			four[3] = uint32(v >> (3 * width) & mask)
			bit += 4 * width
		}
	}
	for ; i < len(to) && bit>>3+8 <= len(b); i++ {
		to[i] = uint32(binary.LittleEndian.Uint64(b[bit>>3:]) >> (bit & 7) & mask)
		bit += width
	}
	for ; i < len(to); i++ {
		var tail [8]byte
		copy(tail[:], b[min(bit>>3, len(b)):])
		to[i] = uint32(binary.LittleEndian.Uint64(tail[:]) >> (bit & 7) & mask)
		bit += width
	}
}

// deltas walks numbers packed by their differences, gives their number and, to
// each, its value, and what stands behind them.
func deltas(b []byte, most int, each func(v int64)) (n int, rest []byte, err error) {
	var head [4]uint64 // values of a block, blocks in it, values, the first value
	for i := range head {
		if head[i], b, err = uvarint(b); err != nil {
			return 0, nil, err
		}
	}
	block, minis, count := head[0], head[1], head[2]
	if minis == 0 || minis > 1<<10 || block == 0 || block > 1<<16 || block%minis != 0 || block/minis%8 != 0 || count > uint64(most) {
		return 0, nil, errClaims
	}
	signed := func(v uint64) int64 { return int64(v>>1) ^ -int64(v&1) }
	n = int(count)
	v, per := signed(head[3]), int(block/minis)
	for i := 0; i < n; {
		if i == 0 {
			each(v)
			i++
			continue
		}
		least, r, err := uvarint(b)
		if err != nil {
			return 0, nil, err
		}
		if b = r; uint64(len(b)) < minis {
			return 0, nil, errRuns
		}
		widths := b[:minis]
		b = b[minis:]
		for _, w := range widths {
			if i == n {
				break // what is left of the block is not there
			}
			size := per / 8 * int(w)
			if w > 64 || len(b) < size {
				return 0, nil, errRuns
			}
			for k := 0; k < per && i < n; k++ {
				v += signed(least) + int64(bitsAt(b, k*int(w), int(w)))
				each(v)
				i++
			}
			b = b[size:]
		}
	}
	return n, b, nil
}

// bitsAt reads a number of any width of at most 64 bits.
func bitsAt(b []byte, bit, width int) uint64 {
	v := uint64(0)
	for got := 0; got < width; {
		take := min(8-bit&7, width-got)
		v |= uint64(b[bit>>3]>>(bit&7)&(1<<take-1)) << got
		got += take
		bit += take
	}
	return v
}
