package ingest

import (
	"archive/zip"
	"bytes"
	"fmt"
	"io"
	"os"
	"path"
	"slices"
	"strings"
)

// Bounds on what an archive may unpack to. Test data as text packs to a tenth,
// with many blanks to a fiftieth; what claims far more is an archive made to fill
// memory.
const (
	unpackLeast = 256 << 20 // always allowed
	unpackRatio = 200       // else times the size of the packed file
	maxEntries  = 10_000
)

// unpackLimit is how much a packed file of a size may unpack to.
func unpackLimit(size int64) int64 { return max(unpackLeast, unpackRatio*size) }

// readerAt is what formats need that are not read from start to end.
type readerAt interface {
	io.Reader
	io.ReaderAt
	io.Seeker
}

// at opens the input for reading at any place.
func (in *input) at() (at readerAt, size int64, done func(), err error) {
	if in.whole != nil {
		return bytes.NewReader(in.whole), int64(len(in.whole)), func() {}, nil
	}
	f, info, err := openFile(in.name)
	if err != nil {
		return nil, 0, nil, err
	}
	return f, info.Size(), func() { f.Close() }, nil
}

// zipKind tells a workbook, which is a zip archive too, from others. A damaged
// archive is left to its reader.
func zipKind(at io.ReaderAt, size int64) fileKind {
	z, err := zip.NewReader(at, size)
	if err != nil {
		return kindZip
	}
	for _, f := range z.File {
		if strings.HasPrefix(f.Name, "xl/") || f.Name == "[Content_Types].xml" {
			return kindWorkbook
		}
	}
	return kindZip
}

// archive adds the data files of a zip archive, in natural order of their names,
// those in folders too. Names that start with a point, and the folder that some
// systems add for their own use, are passed over.
func (l *inputList) archive(name, container string) error {
	fail := func(what, remedy string) error { return &Error{File: name, What: what, Remedy: remedy} }
	f, err := os.Open(name)
	if err != nil {
		return fail("cannot be opened: "+bare(err), "check the permissions")
	}
	l.closers = append(l.closers, f)
	info, err := f.Stat()
	if err != nil {
		return fail("cannot be read: "+bare(err), "check the disk or the network drive")
	}
	z, err := zip.NewReader(f, info.Size())
	if err != nil {
		return fail("the zip archive is damaged or cut short: "+bare(err), "fetch the file again")
	}
	if len(z.File) > maxEntries {
		return fail(fmt.Sprintf("the zip archive has %d entries, more than %d", len(z.File), maxEntries), "unpack it and name the data files")
	}
	entries := slices.Clone(z.File)
	slices.SortStableFunc(entries, func(a, b *zip.File) int { return natural(a.Name, b.Name) })
	before, left := len(l.inputs), unpackLimit(info.Size())
	var others []string
	for _, e := range entries {
		base := path.Base(e.Name)
		switch {
		case e.FileInfo().IsDir(), strings.HasPrefix(base, "."), strings.HasPrefix(e.Name, "__MACOSX/"):
			continue
		case e.Flags&1 != 0:
			return fail("the entry "+quote(e.Name)+" is encrypted", "unpack the archive with its password")
		}
		if left -= int64(min(e.UncompressedSize64, 1<<62)); left < 0 {
			return fail(fmt.Sprintf("unpacks to more than %d times its size, at entry %s; it is not read", unpackRatio, quote(e.Name)), "unpack it if you trust it, and name the data files")
		}
		in := &input{name: name + "/" + e.Name, size: int64(e.CompressedSize64), container: name, open: entryOpener(e)}
		if container != "" {
			in.container = container
		}
		if err := in.sniffEntry(e); err != nil {
			return err
		}
		if in.kind == kindZip || !dataName(e.Name) && (in.kind == kindText || in.kind == kindOther) {
			others = append(others, e.Name)
			continue
		}
		l.inputs = append(l.inputs, in)
	}
	return l.unread(name, "the archive "+name, before, others)
}

// entryOpener opens an entry, which gives no more than it says it holds.
func entryOpener(e *zip.File) func() (io.ReadCloser, error) {
	return func() (io.ReadCloser, error) {
		r, err := e.Open()
		if err != nil {
			return nil, err
		}
		return struct {
			io.Reader
			io.Closer
		}{io.LimitReader(r, int64(min(e.UncompressedSize64, 1<<62))+1), r}, nil
	}
}

// sniffEntry finds the kind of an entry; what must be read at any place is
// unpacked into memory.
func (in *input) sniffEntry(e *zip.File) error {
	f, err := in.open()
	if err != nil {
		return &Error{File: in.name, What: "cannot be unpacked: " + bare(err), Remedy: "pack the archive with the usual method (deflate)", Err: err}
	}
	defer f.Close()
	head := make([]byte, sniffed)
	n, err := io.ReadFull(f, head)
	if err != nil && err != io.EOF && err != io.ErrUnexpectedEOF {
		return &Error{File: in.name, What: "cannot be unpacked: " + bare(err), Remedy: "fetch the archive again", Err: err}
	}
	head = head[:n]
	packed, inner := unpackHead(head, f)
	in.packed, in.kind = packed, kindOf(inner, in.name)
	in.size = int64(min(e.UncompressedSize64, 1<<62))
	switch in.kind {
	case kindParquet, kindArrowFile, kindArrowStream, kindZip:
	default:
		return nil
	}
	if packed != "" {
		in.kind = kindText
		return nil
	}
	again, err := in.open()
	if err == nil {
		defer again.Close()
		in.whole, err = io.ReadAll(again)
	}
	if err != nil {
		return &Error{File: in.name, What: "cannot be unpacked: " + bare(err), Remedy: "fetch the archive again", Err: err}
	}
	if in.kind == kindZip {
		in.kind = zipKind(bytes.NewReader(in.whole), int64(len(in.whole)))
	}
	return nil
}
