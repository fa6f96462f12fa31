package ingest

import (
	"bytes"
	"context"
	"fmt"
	"io"
	"unicode/utf16"
)

// blockSize is how much text is read and parsed at a time. Blocks are cut by
// the reading goroutine at row ends, from the file's bytes alone: what is in a
// block does not depend on how many goroutines parse.
const blockSize = 1 << 20

// headSize is the least of a file that is looked at to find its layout.
const headSize = 64 << 10

// tailSize is how much text before a line that may have broken off tells what
// whole lines look like.
const tailSize = 8 << 10

// block is a run of whole rows.
type block struct {
	buf    []byte // ends in '\n'
	seq    int
	line   int    // line number of its first line
	lines  int    // line ends in buf
	raw    int64  // about how far into the raw file it reaches
	cut    bool   // the file's last line had no line end; one was added
	before []byte // of a cut block: what stood before it, up to tailSize bytes
	torn   bool   // reading broke off in that line: it is not used
	nul    bool   // there are zero bytes in it
}

// blocker cuts a source into blocks.
type blocker struct {
	src   *source
	size  int
	carry []byte // read, not yet given out
	eof   bool
	err   error // what ended the reading, other than EOF
	line  int
	given int64  // bytes of text given out
	tail  []byte // the last of them, up to tailSize
	seq   int
	sep   byte
	want  int
}

// head reads the start of the file, up to one block, without cutting it.
func (k *blocker) head() error {
	k.line = 1
	k.fill(max(k.size, headSize))
	if k.err != nil && len(k.carry) == 0 {
		return k.src.readError(k.err)
	}
	b := k.carry
	if len(b) == 0 {
		return &Error{File: k.src.path, What: "is empty", Remedy: "export it again"}
	}
	if err := k.encoding(); err != nil {
		return err
	}
	if bytes.IndexByte(b, '\n') < 0 && bytes.IndexByte(b, '\r') >= 0 {
		// Lines end in a carriage return alone, as on some old machines.
		k.src.plain = &carriage{k.src.plain}
		for i, c := range b {
			if c == '\r' {
				b[i] = '\n'
			}
		}
	}
	return nil
}

// encoding takes a UTF-8 byte-order mark off and refuses what is not text.
func (k *blocker) encoding() error {
	b := k.carry
	if bytes.HasPrefix(b, []byte("\xef\xbb\xbf")) {
		k.carry = b[3:]
		return nil
	}
	wide := bytes.HasPrefix(b, []byte{0xff, 0xfe}) || bytes.HasPrefix(b, []byte{0xfe, 0xff})
	probe := b[:min(len(b), 4096)]
	zeros := [2]int{}
	for i, c := range probe {
		if c == 0 {
			zeros[i&1]++
		}
	}
	// Latin text in UTF-16 has a zero in every second byte, always on one side.
	n := len(probe) / 2
	if n >= 8 && (zeros[0] > n*8/10 && zeros[1] < n/10 || zeros[1] > n*8/10 && zeros[0] < n/10) {
		wide = true
	}
	if wide {
		return &Error{File: k.src.path, What: "is UTF-16 text" + firstWide(b), Remedy: "save it as UTF-8 (in a spreadsheet: CSV UTF-8)"}
	}
	if i := bytes.IndexByte(probe, 0); i >= 0 {
		return &Error{File: k.src.path, What: fmt.Sprintf("is binary data, not delimited text: a zero byte stands at byte %d", i),
			Remedy: "export the table as CSV"}
	}
	control := 0
	for _, c := range probe {
		if c < ' ' && c != '\n' && c != '\r' && c != '\t' && c != '\f' && c != 0x1a {
			control++
		}
	}
	if control*20 > len(probe) {
		return &Error{File: k.src.path, What: "is binary data, not delimited text", Remedy: "export the table as CSV"}
	}
	return nil
}

// firstWide quotes the start of a UTF-16 text, to show that it was understood.
func firstWide(b []byte) string {
	if len(b) < 8 || b[0] != 0xff && b[0] != 0xfe {
		return ""
	}
	u := make([]uint16, 0, 16)
	for i := 2; i+1 < len(b) && len(u) < 16; i += 2 {
		if b[0] == 0xff {
			u = append(u, uint16(b[i])|uint16(b[i+1])<<8)
		} else {
			u = append(u, uint16(b[i+1])|uint16(b[i])<<8)
		}
	}
	return " starting " + quote(string(utf16.Decode(u)))
}

// carriage turns carriage returns into line feeds.
type carriage struct{ r io.Reader }

func (c *carriage) Read(p []byte) (int, error) {
	n, err := c.r.Read(p)
	for i, b := range p[:n] {
		if b == '\r' {
			p[i] = '\n'
		}
	}
	return n, err
}

// fill reads until carry holds n bytes or the file ends.
func (k *blocker) fill(n int) {
	if cap(k.carry) < n {
		k.carry = append(make([]byte, 0, n), k.carry...)
	}
	for len(k.carry) < n && !k.eof {
		got, err := k.src.plain.Read(k.carry[len(k.carry):n])
		k.carry = k.carry[:len(k.carry)+got]
		if err != nil {
			k.eof = true
			if err != io.EOF {
				k.err = err
			}
		}
	}
}

// next gives the next block; ok is false at the end. spare is a buffer that is
// no longer used, may be nil.
func (k *blocker) next(ctx context.Context, spare []byte) (b block, ok bool, err error) {
	for size := k.size; ; size *= 2 {
		if err := ctx.Err(); err != nil {
			return block{}, false, err
		}
		k.fill(size)
		if k.eof && len(k.carry) <= size {
			break
		}
		if end := k.rowEnd(k.carry[:size]); end > 0 {
			rest := append(spare[:0], k.carry[end:]...)
			b = k.block(k.carry[:end])
			k.carry = rest
			return b, true, nil
		}
		if size >= maxLine {
			return block{}, false, &Error{File: k.src.path, Line: k.line, What: fmt.Sprintf("the line is longer than %d MB", maxLine>>20),
				Remedy: "check that the file is a table of delimited text"}
		}
	}
	buf := k.carry
	k.carry = nil
	if n := len(buf); n > 0 && buf[n-1] == 0x1a {
		buf = buf[:n-1] // the end mark of old systems
	}
	if len(buf) == 0 {
		return block{}, false, nil
	}
	cut := buf[len(buf)-1] != '\n'
	if cut {
		buf = append(buf, '\n')
	}
	before := k.tail
	b = k.block(buf)
	b.cut, b.before = cut, before
	return b, true, nil
}

// lastOf gives the last n bytes of a and b together.
func lastOf(n int, a, b []byte) []byte {
	if len(b) >= n {
		return append([]byte(nil), b[len(b)-n:]...)
	}
	a = a[max(0, len(a)+len(b)-n):]
	return append(append([]byte(nil), a...), b...)
}

func (k *blocker) block(buf []byte) block {
	k.given += int64(len(buf))
	raw := k.given
	if k.src.packed != "" {
		raw = k.src.used()
	}
	b := block{buf: buf, seq: k.seq, line: k.line, raw: raw, lines: bytes.Count(buf, []byte{'\n'}), nul: bytes.IndexByte(buf, 0) >= 0}
	k.tail = lastOf(tailSize, k.tail, buf)
	k.seq++
	k.line += b.lines
	return b
}

// rowEnd is the place after the last row of b that surely ends within it.
func (k *blocker) rowEnd(b []byte) int {
	if bytes.IndexByte(b, '"') < 0 {
		return bytes.LastIndexByte(b, '\n') + 1
	}
	var r row
	i := 0
	for i < len(b) {
		n := bytes.IndexByte(b[i:], '\n')
		if n < 0 {
			break
		}
		if b[i] == '#' || simpleQuotes(b[i:i+n+1], k.sep) {
			i += n + 1
			continue
		}
		splitRow(b, i, k.sep, k.want, false, &r)
		if r.more {
			break
		}
		i = r.next
	}
	return i
}

// simpleQuotes says whether all quotes of a line stand just around its cells, so
// that the row ends with the line.
func simpleQuotes(line []byte, sep byte) bool {
	if bytes.IndexByte(line, '"') < 0 {
		return true
	}
	for i := 0; ; i++ {
		if line[i] == '"' {
			raw, end := quotedCell(line, i, sep)
			if raw == nil {
				return false
			}
			i = end
		} else {
			for line[i] != sep && line[i] != '\n' {
				i++
			}
		}
		if line[i] == '\n' {
			return true
		}
	}
}
