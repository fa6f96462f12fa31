package ingest

import (
	"bytes"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"

	"github.com/klauspost/compress/gzip"
	"github.com/klauspost/compress/zstd"
)

// input is one file to read, or one entry of an archive.
type input struct {
	name      string // as shown: the path, or archive and entry
	size      int64  // raw bytes
	container string // folder, pattern or archive that it was found in; "" when named itself
	kind      fileKind
	packed    string // "gzip", "zstd" around it
	open      func() (io.ReadCloser, error)
	whole     []byte // content of an archive's entry that must be read at any place
	remarks   []Finding
}

// fileKind is a format, told by content first and by name second.
type fileKind int

const (
	kindText fileKind = iota
	kindSTDF
	kindParquet
	kindArrowFile
	kindArrowStream
	kindWorkbook
	kindZip
	kindOther // a format that is known and not read
)

// sniffed is how much of the content tells the kind.
const sniffed = 64

// findInputs is the list of files that paths mean: files, folders, patterns,
// zip archives and files in these.
type inputList struct {
	inputs  []*input
	notes   []Finding
	closers []io.Closer
}

func (l *inputList) close() {
	for _, c := range l.closers {
		c.Close()
	}
}

func findInputs(paths []string) (*inputList, error) {
	l := &inputList{}
	for _, p := range paths {
		if err := l.path(p); err != nil {
			l.close()
			return nil, err
		}
	}
	return l, nil
}

func (l *inputList) path(p string) error {
	info, err := os.Stat(p)
	switch {
	case err == nil && info.IsDir():
		return l.folder(p)
	case err != nil && strings.ContainsAny(p, "*?[") && errors.Is(err, fs.ErrNotExist):
		return l.pattern(p)
	}
	return l.file(p, "")
}

// pattern reads the files that match, in natural order.
func (l *inputList) pattern(p string) error {
	found, err := filepath.Glob(p)
	if err != nil {
		return &Error{File: p, What: "is no pattern of file names: " + err.Error(), Remedy: "use * for any text and ? for one character"}
	}
	if len(found) == 0 {
		return &Error{File: p, What: "no file matches this pattern", Remedy: "check the pattern and the folder", Err: fs.ErrNotExist}
	}
	return l.several(p, "the pattern "+p, found)
}

// folder reads the files of a folder, in natural order; not those of folders in
// it, and none whose name starts with a point.
func (l *inputList) folder(p string) error {
	entries, err := os.ReadDir(p)
	if err != nil {
		return &Error{File: p, What: "the folder cannot be read: " + bare(err), Remedy: "check the permissions", Err: err}
	}
	var found []string
	for _, e := range entries {
		if !strings.HasPrefix(e.Name(), ".") {
			found = append(found, filepath.Join(p, e.Name()))
		}
	}
	if len(found) == 0 {
		return &Error{File: p, What: "the folder is empty", Remedy: "name a folder with data files"}
	}
	return l.several(p, "the folder "+p, found)
}

func (l *inputList) several(container, shown string, found []string) error {
	slices.SortFunc(found, natural)
	before := len(l.inputs)
	var others []string
	for _, f := range found {
		if info, err := os.Stat(f); err == nil && info.IsDir() {
			others = append(others, filepath.Base(f)+"/")
			continue
		}
		if !dataName(f) {
			kind, err := sniffFile(f)
			if err != nil {
				return err
			}
			if kind == kindText || kind == kindOther {
				others = append(others, filepath.Base(f))
				continue
			}
		}
		if err := l.file(f, container); err != nil {
			return err
		}
	}
	return l.unread(container, shown, before, others)
}

// unread notes what was passed over in a folder, pattern or archive.
func (l *inputList) unread(container, shown string, before int, others []string) error {
	if len(l.inputs) == before {
		return &Error{File: container, What: shown + " holds no data file; there are " + list(others, 8), Remedy: "name the data files"}
	}
	if len(others) > 0 {
		l.notes = append(l.notes, Finding{Code: "file-skipped", Severity: Info, Text: fmt.Sprintf("%s: %d %s no data files by their names, or folders, and %s not read: %s", shown,
			len(others), plural(len(others), "entry is", "entries are"), plural(len(others), "was", "were"), list(others, 12)),
			Remedy: "name a file by itself if it holds data"})
	}
	return nil
}

// dataNames are the endings of files that are read.
var dataNames = set(".csv", ".txt", ".tsv", ".tab", ".dat", ".stdf", ".std", ".parquet", ".arrow", ".arrows", ".ipc", ".xlsx", ".xlsm", ".zip")

// dataName says whether a name looks like that of a data file.
func dataName(name string) bool {
	name = strings.ToLower(filepath.Base(name))
	for _, e := range []string{".gz", ".zst"} {
		name = strings.TrimSuffix(name, e)
	}
	return dataNames[filepath.Ext(name)] && !strings.HasPrefix(name, "readme")
}

// file adds one file, or the files in it.
func (l *inputList) file(path, container string) error {
	src, err := openSource0(path)
	if err != nil {
		return err
	}
	size := src.size
	src.close()
	in := &input{name: path, size: size, container: container, open: func() (io.ReadCloser, error) { return os.Open(path) }}
	if err := in.sniff(); err != nil {
		return err
	}
	if in.kind != kindZip {
		l.inputs = append(l.inputs, in)
		return nil
	}
	return l.archive(path, container)
}

// openSource0 checks that there is a regular file that opens.
func openSource0(path string) (*source, error) {
	f, info, err := openFile(path)
	if err != nil {
		return nil, err
	}
	return newSource(path, f, info.Size(), nil), nil
}

func sniffFile(path string) (fileKind, error) {
	in := &input{name: path, open: func() (io.ReadCloser, error) { return os.Open(path) }}
	err := in.sniff()
	return in.kind, err
}

// sniff finds out what kind of file it is.
func (in *input) sniff() error {
	f, err := in.open()
	if err != nil {
		return &Error{File: in.name, What: "cannot be opened: " + bare(err), Remedy: "check the permissions", Err: err}
	}
	defer f.Close()
	head := make([]byte, sniffed)
	n, err := io.ReadFull(f, head)
	if err != nil && err != io.EOF && err != io.ErrUnexpectedEOF {
		return &Error{File: in.name, What: "cannot be read: " + bare(err), Remedy: "check the disk or the network drive", Err: err}
	}
	head = head[:n]
	in.packed, head = unpackHead(head, f)
	in.kind = kindOf(head, in.name)
	if in.kind != kindZip {
		return nil
	}
	if in.packed != "" {
		in.kind = kindText // its reader refuses it
		return nil
	}
	at, size, done, err := in.at()
	if err != nil {
		return err
	}
	defer done()
	in.kind = zipKind(at, size)
	return nil
}

// unpackHead looks into a packed stream; what is damaged is left to its reader.
func unpackHead(head []byte, rest io.Reader) (string, []byte) {
	all := io.MultiReader(bytes.NewReader(head), rest)
	var z io.Reader
	packed := ""
	switch {
	case bytes.HasPrefix(head, []byte{0x1f, 0x8b}):
		packed = "gzip"
		if r, err := gzip.NewReader(all); err == nil {
			z = r
		}
	case bytes.HasPrefix(head, []byte{0x28, 0xb5, 0x2f, 0xfd}):
		packed = "zstd"
		if r, err := zstd.NewReader(all, zstd.WithDecoderConcurrency(1), zstd.WithDecoderLowmem(true), zstd.WithDecoderMaxWindow(128<<20)); err == nil {
			defer r.Close()
			z = r
		}
	default:
		return "", head
	}
	inner := make([]byte, sniffed)
	n := 0
	if z != nil {
		n, _ = io.ReadFull(z, inner)
	}
	return packed, inner[:n]
}

// kindOf tells a kind by the first bytes, else by the name.
func kindOf(head []byte, name string) fileKind {
	low := strings.ToLower(name)
	for _, e := range []string{".gz", ".zst"} {
		low = strings.TrimSuffix(low, e)
	}
	ext := filepath.Ext(low)
	switch {
	case len(head) >= 4 && head[2] == 0 && head[3] == 10 && (head[0] == 2 && head[1] == 0 || head[0] == 0 && head[1] == 2):
		return kindSTDF // a file attributes record of two bytes, in either byte order
	case bytes.HasPrefix(head, []byte("PAR1")):
		return kindParquet
	case bytes.HasPrefix(head, []byte("ARROW1")):
		return kindArrowFile
	case len(head) >= 8 && bytes.HasPrefix(head, []byte{0xff, 0xff, 0xff, 0xff}) && head[7] == 0:
		return kindArrowStream
	case bytes.HasPrefix(head, []byte("PK\x03\x04")), bytes.HasPrefix(head, []byte("PK\x05\x06")):
		return kindZip
	}
	for _, k := range knownOthers {
		if bytes.HasPrefix(head, []byte(k.magic)) {
			return kindOther
		}
	}
	if ext == ".stdf" || ext == ".std" {
		return kindSTDF
	}
	if len(head) > 0 && head[0] == 0 || bytes.IndexByte(head, 0) >= 0 {
		switch ext { // binary, but not what its name says: its reader explains
		case ".parquet":
			return kindParquet
		case ".arrow", ".ipc", ".feather":
			return kindArrowFile
		case ".arrows":
			return kindArrowStream
		}
	}
	return kindText
}

// raw opens the input as it is, counted and hashed.
func (in *input) raw(progress func(int64)) (*source, error) {
	f, err := in.open()
	if err != nil {
		return nil, &Error{File: in.name, What: "cannot be opened: " + bare(err), Remedy: "check the permissions", Err: err}
	}
	return newSource(in.name, f, in.size, progress), nil
}

// text opens the input as delimited text.
func (in *input) text(progress func(int64)) (*source, error) {
	s, err := in.raw(progress)
	if err != nil {
		return nil, err
	}
	if in.kind == kindWorkbook {
		err = in.workbook(s)
	} else {
		err = s.unpack()
	}
	if err != nil {
		s.close()
		return nil, err
	}
	return s, nil
}

// amend completes what a text reader says of a file that was none.
func (in *input) amend(d *fileData) {
	if in.kind == kindWorkbook {
		shape := "wide"
		if d.layout.long {
			shape = "long"
		}
		d.input.Format = "xlsx workbook, " + shape
		d.layout.sep = 0
	}
	d.notes = append(d.notes, in.remarks...)
}

// readInput reads one input in its format.
func readInput(ctx context.Context, in *input, index int, sch *schema, opt *Options, progress func(int64)) (d *fileData, err error) {
	switch in.kind {
	case kindSTDF:
		return readSTDF(ctx, in, index, sch, progress)
	case kindParquet, kindArrowFile, kindArrowStream:
		return readColumns(ctx, in, index, sch, opt, progress)
	}
	return readFile(ctx, in, index, sch, opt, progress)
}

// waferWord finds the wafer in a file name: LOT7_W03.csv, wafer-3.csv.
var waferWord = regexp.MustCompile(`(?i)(?:^|[^a-z0-9])(?:wafer|waf|wf|w)[ _.-]?0*([0-9]{1,3})(?:[^a-z0-9]|$)`)

// waferElse is the wafer of a file of a folder, pattern or archive that names
// none: the number after W or wafer in its name, else the name.
func (in *input) waferElse() string {
	if in.container == "" {
		return ""
	}
	return waferOfName(in.name)
}

func waferOfName(name string) string {
	stem := stemOf(name)
	if m := waferWord.FindStringSubmatchIndex(stem); m != nil {
		// With its leading zeros, as file names have them.
		i := m[2]
		for i > 0 && stem[i-1] == '0' {
			i--
		}
		return stem[i:m[3]]
	}
	return stem
}

// stemOf is a file's name without folder and endings.
func stemOf(name string) string {
	base := filepath.Base(name)
	for {
		ext := strings.ToLower(filepath.Ext(base))
		if ext == "" || ext == strings.ToLower(base) || ext != ".gz" && ext != ".zst" && !dataNames[ext] {
			return base
		}
		base = base[:len(base)-len(ext)]
	}
}
