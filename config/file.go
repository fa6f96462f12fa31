package config

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"unicode/utf8"

	"github.com/spf13/viper"
)

// maxFile caps a product or settings file. A product with a thousand tests
// takes a tenth of it; what is larger is a data file given by mistake.
const maxFile = 4 << 20

// maxKeys caps the keys of a YAML or TOML file: both decoders compare each key of
// a block with all others, which takes minutes for a file of nothing but keys.
// A thousand tests have eight thousand.
const maxKeys = 30_000

// maxNesting caps brackets within brackets. The schema needs five.
const maxNesting = 1000

// readFile reads a product or settings file whole. kind is what it is to be,
// for the messages.
func readFile(path, kind string) ([]byte, error) {
	fail := func(what, remedy string, err error) ([]byte, error) {
		return nil, &FileError{File: path, What: what, Remedy: remedy, Err: err}
	}
	f, err := os.Open(path)
	switch {
	case errors.Is(err, fs.ErrNotExist):
		return fail("there is no such file", "check the path of the "+kind+" file", err)
	case errors.Is(err, fs.ErrPermission):
		return fail("the file may not be read", "ask its owner for permission to read it", err)
	case err != nil:
		return fail("the file cannot be opened ("+plainError(err)+")", "check the path of the "+kind+" file", err)
	}
	defer f.Close()
	if info, err := f.Stat(); err == nil && info.IsDir() {
		return fail("this is a folder", "name the "+kind+" file in it", nil)
	}
	data, err := io.ReadAll(io.LimitReader(f, maxFile+1))
	if err != nil {
		return fail("reading stopped ("+plainError(err)+")", "copy the file to a disk that can be read and try again", err)
	}
	return data, nil
}

// plainError is the system's reason without the path, which is said already.
func plainError(err error) string {
	var p *fs.PathError
	if errors.As(err, &p) {
		err = p.Err
	}
	return oneLine(err.Error())
}

func oneLine(s string) string { return strings.Join(strings.Fields(s), " ") }

// decodeFile turns the bytes of a file into maps with the keys as written,
// through the decoders of viper: the format is that of the file's extension.
// Viper itself lowers every key, which test names must be spared.
//
// Maps come out as map[string]any, lists as []any, numbers as float64, dates as
// date; so a file says the same in every format.
func decodeFile(file string, data []byte, kind string) (root map[string]any, double []string, err error) {
	fail := func(line int, what, remedy string, err error) (map[string]any, []string, error) {
		return nil, nil, &FileError{File: file, Line: line, What: what, Remedy: remedy, Err: err}
	}
	format := strings.ToLower(strings.TrimPrefix(filepath.Ext(file), "."))
	if format == "yml" {
		format = "yaml"
	}
	if format != "yaml" && format != "toml" && format != "json" {
		return fail(0, fmt.Sprintf("a %s file does not end in %q", kind, filepath.Ext(file)),
			"name it .yaml, .toml or .json after what it holds", nil)
	}
	if len(data) > maxFile {
		return fail(0, fmt.Sprintf("the file is larger than %d MB", maxFile>>20), "this is no "+kind+" file; check the path", nil)
	}
	data = bytes.TrimPrefix(data, []byte("\xef\xbb\xbf"))
	if line, what := notText(data); what != "" {
		return fail(line, what, "give a "+kind+" file saved as UTF-8 text", nil)
	}
	if len(bytes.TrimSpace(data)) == 0 {
		return fail(0, "the file is empty", emptyRemedy(kind), nil)
	}
	name := strings.ToUpper(format)
	if line, what := beyondDecoder(format, data); what != "" {
		return fail(line, what, "keep one "+kind+" and nothing else in the file", nil)
	}
	raw := map[string]any{}
	if err := decodeSafely(format, data, raw); err != nil {
		line, what := explain(format, data, err)
		return fail(line, "not valid "+name+": "+what, "mend that line, or compare it with the example in the documentation", err)
	}
	if format == "json" {
		if line, key := doubleKey(data); key != "" {
			return fail(line, fmt.Sprintf("not valid JSON: the key %q stands twice in one block", key), "keep one of them", nil)
		}
	}
	root, _ = plain(raw, "", &double).(map[string]any)
	if len(root) == 0 {
		return fail(0, "the file holds no keys", emptyRemedy(kind), nil)
	}
	return root, double, nil
}

func emptyRemedy(kind string) string {
	if kind == "product" {
		return "draft one from a data file with 'kneepoint product FILE -o product.yaml'"
	}
	return "write a key a line, as in 'rings: 5', or leave the file out"
}

// notText finds what no text file has.
func notText(data []byte) (line int, what string) {
	if bytes.HasPrefix(data, []byte("\xff\xfe")) || bytes.HasPrefix(data, []byte("\xfe\xff")) {
		return 0, "the file is UTF-16 text"
	}
	if i := bytes.IndexByte(data, 0); i >= 0 {
		return 0, fmt.Sprintf("this is a binary file (a zero at byte %d)", i)
	}
	for i, rest := 0, data; len(rest) > 0; {
		r, n := utf8.DecodeRune(rest)
		if r == utf8.RuneError && n == 1 {
			return lineAt(data, i), fmt.Sprintf("byte %d is no UTF-8 text", i)
		}
		i, rest = i+n, rest[n:]
	}
	return 0, ""
}

func lineAt(data []byte, offset int) int {
	return 1 + bytes.Count(data[:min(max(offset, 0), len(data))], []byte("\n"))
}

// beyondDecoder finds what a decoder would pass over in silence or take very
// long for: a second YAML document, and TOML nested without end.
func beyondDecoder(format string, data []byte) (line int, what string) {
	for _, marks := range map[string][]string{"yaml": {":?", ","}, "toml": {"=["}}[format] {
		keys := 0
		for i := range len(marks) {
			keys += bytes.Count(data, []byte(marks[i:i+1]))
		}
		if keys > maxKeys {
			return 0, fmt.Sprintf("the file has about %d keys, too many by far", keys)
		}
	}
	switch format {
	case "yaml":
		content, ended := false, false
		for i, s := range strings.Split(string(data), "\n") {
			s = strings.TrimRight(s, " \t\r")
			marker := s == "---" || strings.HasPrefix(s, "--- ")
			switch {
			case marker && content, ended && s != "" && s[0] != '#':
				return i + 1, "a second YAML document begins here"
			case s == "...":
				ended = true
			case s != "" && s != "---" && s[0] != '#' && s[0] != '%':
				content = true
			}
		}
	case "toml":
		depth := 0
		for i, s := range bytes.Split(data, []byte("\n")) {
			if len(s) > 64<<10 {
				return i + 1, "this line is longer than 64 kB"
			}
			depth += bytes.Count(s, []byte("[")) + bytes.Count(s, []byte("{")) -
				bytes.Count(s, []byte("]")) - bytes.Count(s, []byte("}"))
			if depth > maxNesting {
				return i + 1, fmt.Sprintf("more than %d brackets are open here", maxNesting)
			}
		}
	}
	return 0, ""
}

// decodeSafely calls viper's decoder; should one panic, that is an error of the
// file like another.
func decodeSafely(format string, data []byte, into map[string]any) (err error) {
	defer func() {
		if r := recover(); r != nil {
			err = fmt.Errorf("the decoder failed: %v", r)
		}
	}()
	decoder, err := viper.NewCodecRegistry().Decoder(format)
	if err != nil {
		return err
	}
	return decoder.Decode(data, into)
}

var yamlLine = regexp.MustCompile(`line (\d+): `)

// explain says in one line what a decoder found and where.
func explain(format string, data []byte, err error) (line int, what string) {
	what = strings.TrimPrefix(oneLine(err.Error()), format+": ")
	what = strings.TrimPrefix(what, "unmarshal errors: ")
	var syntax *json.SyntaxError
	var kind *json.UnmarshalTypeError
	var positioned interface{ Position() (row, column int) }
	switch {
	case errors.As(err, &syntax):
		line = lineAt(data, int(syntax.Offset)-1)
	case errors.As(err, &kind):
		line, what = 1, map[string]string{"array": "a list"}[kind.Value]
		if what == "" {
			what = "a plain value"
		}
		what += " stands where keys belong"
	case errors.As(err, &positioned):
		line, _ = positioned.Position()
	default:
		if m := yamlLine.FindStringSubmatchIndex(what); m != nil {
			line, _ = strconv.Atoi(what[m[2]:m[3]])
			what = what[m[1]:]
			if strings.HasPrefix(what, "did not find expected") {
				line++ // these come from the parser, which counts lines from 0
			}
			if next := yamlLine.FindStringIndex(what); next != nil {
				what = strings.TrimSpace(what[:next[0]]) + " (and more)"
			}
		}
	}
	if m := yamlKind.FindStringSubmatch(what); m != nil {
		what = map[string]string{"seq": "a list", "map": "a block"}[m[1]]
		if what == "" {
			what = "a plain value"
		}
		what += " stands where keys belong"
	}
	if line == 0 {
		line = firstBadLine(format, data, err)
	}
	if len(what) > 300 {
		what = strings.ToValidUTF8(what[:300], "") + "..."
	}
	return line, what
}

var yamlKind = regexp.MustCompile(`^cannot unmarshal !!(\w+) .*into (map|string)`)

// firstBadLine finds the line for an error that names none: the last of the
// fewest lines at the file's start that give the same error.
// It decodes some twenty times, so a large file gets no line: 0.
func firstBadLine(format string, data []byte, want error) int {
	if len(data) > 1<<18 {
		return 0
	}
	lines := bytes.SplitAfter(data, []byte("\n"))
	lo, hi, end := 0, len(lines), len(data) // lines[:hi] has the error, lines[:lo] has not
	for hi-lo > 1 {
		mid := (lo + hi) / 2
		size := 0
		for _, l := range lines[:mid] {
			size += len(l)
		}
		if err := decodeSafely(format, data[:min(size, end)], map[string]any{}); err != nil && err.Error() == want.Error() {
			hi = mid
		} else {
			lo = mid
		}
	}
	return hi
}

// doubleKey finds a key that stands twice in one JSON block; the decoder keeps
// the last and is silent.
func doubleKey(data []byte) (line int, key string) {
	d := json.NewDecoder(bytes.NewReader(data))
	type level struct {
		keys  map[string]bool // nil in a list
		value bool            // the next token is a key's value
	}
	var stack []level
	for {
		token, err := d.Token()
		if err != nil {
			return 0, ""
		}
		top := len(stack) - 1
		if delim, ok := token.(json.Delim); ok && (delim == '}' || delim == ']') {
			stack = stack[:top]
			continue
		}
		if top >= 0 && stack[top].keys != nil {
			if !stack[top].value {
				k := token.(string)
				if stack[top].keys[k] {
					return lineAt(data, int(d.InputOffset())-1), k
				}
				stack[top].keys[k] = true
				stack[top].value = true
				continue
			}
			stack[top].value = false
		}
		switch token {
		case json.Delim('{'):
			stack = append(stack, level{keys: map[string]bool{}})
		case json.Delim('['):
			stack = append(stack, level{})
		}
	}
}
