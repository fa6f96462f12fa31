package ingest

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"errors"
	"fmt"
	"hash"
	"io"
	"io/fs"
	"os"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// source is one file, or entry of an archive, as a stream of plain bytes, with
// the hash and the count of its raw ones. It is used by one goroutine.
type source struct {
	path     string
	file     io.Reader
	size     int64 // of the raw file
	hash     hash.Hash
	raw      int64  // bytes read of it
	packed   string // "gzip", "zstd", ""
	plain    io.Reader
	ahead    *bufio.Reader // before unpacking; nil when nothing is unpacked
	closers  []func()
	progress func(read int64)
}

// openSource opens a file and finds out by its first bytes how it is packed.
func openSource(path string, progress func(int64)) (*source, error) {
	f, info, err := openFile(path)
	if err != nil {
		return nil, err
	}
	s := newSource(path, f, info.Size(), progress)
	if err := s.unpack(); err != nil {
		s.close()
		return nil, err
	}
	return s, nil
}

// openFile opens a regular file.
func openFile(path string) (*os.File, fs.FileInfo, error) {
	info, err := os.Stat(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return nil, nil, &Error{File: path, What: "there is no such file", Remedy: "check the name and the folder", Err: err}
	case err != nil:
		return nil, nil, &Error{File: path, What: "cannot be read: " + bare(err), Remedy: "check the name and the permissions", Err: err}
	case info.IsDir():
		return nil, nil, &Error{File: path, What: "is a folder", Remedy: "name the files in it"}
	case !info.Mode().IsRegular():
		return nil, nil, &Error{File: path, What: "is not a regular file", Remedy: "save the data to a file first"}
	}
	f, err := os.Open(path)
	if err != nil {
		return nil, nil, &Error{File: path, What: "cannot be opened: " + bare(err), Remedy: "check the permissions", Err: err}
	}
	return f, info, nil
}

// newSource counts and hashes what is read of f; nothing is unpacked yet.
func newSource(path string, f io.ReadCloser, size int64, progress func(int64)) *source {
	s := &source{path: path, file: f, size: size, hash: sha256.New(), progress: progress}
	s.closers = append(s.closers, func() { f.Close() })
	return s
}

// unpack tells packed files by their magic bytes (RFC 1952, RFC 8878), as
// names lie.
func (s *source) unpack() error {
	raw := bufio.NewReaderSize(rawReader{s}, 256<<10)
	magic, err := raw.Peek(4)
	if err != nil && err != io.EOF {
		return s.readError(err)
	}
	s.ahead = raw
	switch {
	case bytes.HasPrefix(magic, []byte{0x1f, 0x8b}):
		s.packed = "gzip"
		z, err := gzip.NewReader(raw)
		if err != nil {
			return s.readError(err)
		}
		s.plain = z
	case bytes.HasPrefix(magic, []byte{0x28, 0xb5, 0x2f, 0xfd}):
		s.packed = "zstd"
		z, err := zstd.NewReader(raw, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(zstdWindowOf(s.size)))
		if err != nil {
			return s.readError(err)
		}
		s.closers = append(s.closers, z.Close)
		s.plain = z
	default:
		s.plain = raw
		return s.knownOther(magic)
	}
	return nil
}

// Windows of zstd, that a frame claims and the decoder makes room for before it
// has read a byte. RFC 8878 (3.1.1.1.2) recommends that 8 MB be read by all;
// a writer of long distance (its common setting is 128 MB) has a file of some size.
const (
	zstdWindow     = 8 << 20
	zstdWindowMost = 512 << 20
)

// zstdWindowOf bounds the window of a packed file by its size.
func zstdWindowOf(size int64) uint64 {
	return uint64(min(max(zstdWindow, unpackRatio*size), zstdWindowMost))
}

// knownOthers are formats that are told and not read, by their first bytes.
var knownOthers = []struct{ magic, what, remedy string }{
	{"PK\x03\x04", "is a zip archive or a spreadsheet where delimited text is wanted", "save it as CSV, or unpack it"},
	{"\xd0\xcf\x11\xe0", "is an old spreadsheet file (.xls), which is not read", "save it as .xlsx or CSV"},
	{"%PDF", "is a PDF, not delimited text", "export the table as CSV"},
	{"BZh", "is packed with bzip2", "unpack it, or pack it with gzip or zstd"},
	{"\xfd7zX", "is packed with xz", "unpack it, or pack it with gzip or zstd"},
	{"\x89PNG", "is a picture", "name the data files"},
	{"\xff\xd8\xff", "is a picture", "name the data files"},
	{"GIF8", "is a picture", "name the data files"},
}

// knownOther refuses files that are clearly something else.
func (s *source) knownOther(magic []byte) error {
	for _, k := range knownOthers {
		if bytes.HasPrefix(magic, []byte(k.magic)) {
			return &Error{File: s.path, What: k.what, Remedy: k.remedy}
		}
	}
	return nil
}

// rawReader counts and hashes what is read of the file.
type rawReader struct{ s *source }

func (r rawReader) Read(p []byte) (int, error) {
	n, err := r.s.file.Read(p)
	r.s.hash.Write(p[:n])
	r.s.raw += int64(n)
	if r.s.progress != nil {
		r.s.progress(r.s.raw)
	}
	return n, err
}

// used is how many bytes of the raw file the text read so far was made of.
func (s *source) used() int64 {
	if s.ahead == nil {
		return s.raw
	}
	return s.raw - int64(s.ahead.Buffered())
}

func (s *source) readError(err error) *Error {
	e := &Error{File: s.path, Err: err}
	if errors.Is(err, zstd.ErrWindowSizeExceeded) {
		e.What = fmt.Sprintf("is packed with a zstd window of more than %d MB, which a file of %d bytes does not need", zstdWindowOf(s.size)>>20, s.size)
		e.Remedy = "pack it again with a smaller window, or unpack it if you trust it"
	} else if s.packed != "" {
		e.What = fmt.Sprintf("the %s data are damaged or cut short at about byte %d of %d: %s", s.packed, s.raw, s.size, bare(err))
		e.Remedy = "fetch the file again"
	} else {
		e.What = fmt.Sprintf("reading failed at byte %d of %d: %s", s.raw, s.size, bare(err))
		e.Remedy = "check the disk or the network drive"
	}
	return e
}

// drain reads what is left of the raw file, so that the hash is of all of it.
func (s *source) drain() {
	buf := make([]byte, 64<<10)
	for {
		if _, err := (rawReader{s}).Read(buf); err != nil {
			return
		}
	}
}

func (s *source) sum() string { return hex.EncodeToString(s.hash.Sum(nil)) }

func (s *source) close() {
	for i := len(s.closers) - 1; i >= 0; i-- {
		s.closers[i]()
	}
	s.closers = nil
}

// bare takes the path off an error of the file system: the message names it.
func bare(err error) string {
	var p *fs.PathError
	if errors.As(err, &p) {
		return p.Err.Error()
	}
	return err.Error()
}
