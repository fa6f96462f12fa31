package stdf

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// source is the raw input: it keeps the error of reading it apart from errors
// of unpacking what was read.
type source struct {
	in     io.Reader
	err    error
	packed string // "gzip", "zstd", "" plain

	unpackErr error // why unpacking stopped before its end
}

func (s *source) Read(p []byte) (int, error) {
	n, err := s.in.Read(p)
	if err != nil && err != io.EOF {
		s.err = err
	}
	return n, err
}

// zstdWindow is the largest window of a zstd frame that is unpacked: up to what
// the packer's highest levels use, but no more than a small file can have use
// for, as the unpacker takes the memory that the frame asks for.
func (r *Reader) zstdWindow() uint64 {
	const least, most, ratio = 8 << 20, 128 << 20, 64
	if n := r.need(maxWindow); r.eof {
		return uint64(min(max(ratio*n, least), most))
	}
	return most
}

// begin finds out how the stream is packed and in which byte order it is
// written. False when it is no STDF V4.
func (r *Reader) begin() bool {
	r.begun = true
	r.in = r.src
	n := r.need(4)
	b := r.buf[:n]
	switch {
	case bytes.HasPrefix(b, []byte{0x1f, 0x8b}): // RFC 1952
		r.unpack("gzip", func(in io.Reader) (io.Reader, error) { return gzip.NewReader(in) })
	case bytes.HasPrefix(b, []byte{0x28, 0xb5, 0x2f, 0xfd}): // RFC 8878
		window := r.zstdWindow()
		r.unpack("zstd", func(in io.Reader) (io.Reader, error) {
			return zstd.NewReader(in, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(window))
		})
	}
	return r.findOrder()
}

// unpack puts an unpacker in front of what was read and what is left.
func (r *Reader) unpack(name string, open func(io.Reader) (io.Reader, error)) {
	read := bytes.Clone(r.buf[:r.end])
	if r.eof {
		r.src.in = bytes.NewReader(nil)
	}
	in, err := open(io.MultiReader(bytes.NewReader(read), r.src))
	r.src.packed = name
	r.in, r.end, r.eof = in, 0, err != nil
	if err != nil {
		r.endOfInput(err)
	}
}

// far says in which byte order b starts with a file attributes record.
func far(b []byte) (big, ok bool) {
	if len(b) < 4 || b[2] != 0 || b[3] != 10 {
		return false, false
	}
	switch {
	case b[0] == 2 && b[1] == 0:
		return false, true
	case b[0] == 0 && b[1] == 2:
		return true, true
	}
	return false, false
}

// findOrder settles the byte order by the file attributes record; where that
// is missing or contradicts itself, by which order makes a chain of headers.
// False when there is no STDF V4 here.
func (r *Reader) findOrder() bool {
	n := r.need(6)
	if n == 0 {
		return r.noSTDF("the file is empty")
	}
	b := r.buf[r.pos : r.pos+n]
	big, isFAR := far(b)
	if isFAR && n < 6 {
		r.c.big = big
		return true // cut inside its first record: Scan says so
	}
	if isFAR {
		cpu, version := b[4], b[5]
		if version >= 1 && version <= 3 {
			return r.refuse(&FormatError{5, fmt.Sprintf("this is STDF version %d; only version 4 is read", version), "have it written as STDF V4"})
		}
		if version == 4 && (cpu == 1 && big || cpu == 2 && !big || cpu == 0 && !big) {
			r.c.big = big
			r.findFloats(cpu)
			return true
		}
	}
	little, _ := r.score(0, false)
	large, _ := r.score(0, true)
	order := large > little || large == little && big
	switch best := max(little, large); {
	case isFAR && best >= 2:
		r.c.big = order
		r.damages.add(0, DamageStart, 0, "the file attributes record says CPU type %d and version %d, and its length is %s; read as version 4, %s, as the headers that follow chain so",
			b[4], b[5], orderName(big), orderName(order))
		r.findFloats(b[4])
	case best >= strongChain:
		r.c.big = order
		r.damages.add(0, DamageStart, 0, "the file does not start with a file attributes record; read as %s, as its headers chain so", orderName(order))
	default:
		return r.findStart()
	}
	return true
}

// strongChain is how many headers must chain to call something STDF that does
// not start as such, unless they lead to its very end.
const strongChain = 8

// findStart looks for the first records behind something else: a label, a
// transfer's preamble, a start that was overwritten.
func (r *Reader) findStart() bool {
	b := r.buf[r.pos:r.end]
	if bytes.HasPrefix(b, []byte{2, 0, 0, 13, 10}) || bytes.HasPrefix(b, []byte{0, 2, 0, 13, 10}) {
		return r.refuse(&FormatError{3, "line ends were put into the file, as by a transfer in text mode", "send it again in binary mode"})
	}
	for s := 0; r.need(s+6) >= s+6; s++ {
		for _, big := range [...]bool{false, true} {
			at := r.buf[r.pos+s : r.end]
			if !parseHeader(at, big).strict() {
				continue
			}
			order, isFAR := far(at)
			n, end := r.score(s, big)
			if n >= strongChain || n >= 3 && end || n >= 2 && isFAR && order == big && at[5] == 4 {
				r.c.big = big
				r.damages.add(0, DamageStart, int64(s), "no record starts at the first byte; read from byte %d as %s, where headers chain", s, orderName(big))
				r.pos += s
				return true
			}
		}
	}
	return r.noSTDF("no STDF records are found here")
}

func (r *Reader) noSTDF(text string) bool {
	e := r.src.unpackErr
	if errors.Is(e, zstd.ErrWindowSizeExceeded) {
		return r.refuse(&FormatError{0, "the zstd data cannot be unpacked: their frame asks for a larger window than a file of this size has use for",
			"pack it again with a smaller window, or unpack it if you trust it"})
	}
	if e != nil && r.base+int64(r.end) == 0 {
		return r.refuse(&FormatError{0, fmt.Sprintf("the %s data cannot be unpacked (%v)", r.src.packed, e), "fetch the file again"})
	}
	return r.refuse(&FormatError{0, text, "give a file in STDF V4, plain or packed with gzip or zstd"})
}

// refuse gives up, unless that it could not be read is known already.
func (r *Reader) refuse(err *FormatError) bool {
	if r.err == nil {
		r.err = err
	}
	return false
}

func orderName(big bool) string {
	if big {
		return "big-endian"
	}
	return "little-endian"
}

// score counts how many headers chain from pos+s on, 16 at most, and says
// whether they lead to the end of the file.
func (r *Reader) score(s int, big bool) (n int, end bool) {
	for ; n < 16; n++ {
		if have := r.need(s + 4); have < s+4 {
			return n, have == s && r.eof
		}
		h := parseHeader(r.buf[r.pos+s:], big)
		if !h.strict() {
			break
		}
		s += 4 + h.size
	}
	return n, false
}

// findFloats settles how R*4 are written when CPU_TYPE is 0. The standard means
// VAX floats by it; programs that never set the field leave it 0 too, and write
// IEEE ones. Read in the wrong way numbers become zeros or wild, so those of the
// first parametric results tell.
func (r *Reader) findFloats(cpu uint8) {
	if cpu != 0 || r.c.big {
		return
	}
	vax, ieee := 0, 0
	for s, n := 0, 0; n < 1000 && r.need(s+4) >= s+4; n++ {
		h := parseHeader(r.buf[r.pos+s:], false)
		if r.need(s+4+h.size) < s+4+h.size {
			break
		}
		if h.kind == KindPTR && h.size >= 12 {
			v := u4(r.buf[r.pos+s+12:], false)
			vax += usual(vaxF(v))
			ieee += usual(math.Float32frombits(v))
		}
		s += 4 + h.size
	}
	r.c.vax = vax >= ieee
	if !r.c.vax {
		r.damages.add(0, DamageStart, 0, "the file attributes record says CPU type 0, which means VAX floats; its numbers are IEEE floats and are read so")
	}
}

// usual is 1 for a number of a size that measurements have.
func usual(f float32) int {
	if f < 0 {
		f = -f
	}
	if f > 1e-18 && f < 1e15 {
		return 1
	}
	return 0
}
