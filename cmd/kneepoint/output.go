package main

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"strings"

	"golang.org/x/term"

	"kneepoint/reports"
	"kneepoint/reports/page"
	"kneepoint/reports/text"
)

// writeReport writes the HTML and the JSON of a report into a folder and returns
// their paths. Both are rendered before anything is written, and each file
// appears whole or not at all; inputs are never overwritten.
func writeReport(dir string, inputs []string, r *reports.Report) ([]string, error) {
	var html, data bytes.Buffer
	if err := r.WriteJSON(&data); err != nil {
		return nil, err
	}
	if err := page.Render(&html, r); err != nil {
		return nil, err
	}
	if err := os.MkdirAll(dir, 0o777); err != nil {
		return nil, fmt.Errorf("%s: cannot make the folder for the report: %w; choose another with -o", dir, reason(err))
	}
	base := filepath.Join(dir, fileName(r.Lot))
	paths := []string{base + ".html", base + ".json"}
	for i, content := range [][]byte{html.Bytes(), data.Bytes()} {
		if err := writeFile(paths[i], inputs, content); err != nil {
			return nil, err
		}
	}
	return paths, nil
}

// writeFile writes a file whole or not at all.
func writeFile(path string, inputs []string, content []byte) (err error) {
	if same, input := isInput(path, inputs); same {
		return fmt.Errorf("%s: would overwrite the input %s; choose another folder with -o", path, input)
	}
	temp, err := os.CreateTemp(filepath.Dir(path), ".kneepoint-*")
	if err != nil {
		return fmt.Errorf("%s: cannot write here: %w; choose another folder with -o", filepath.Dir(path), reason(err))
	}
	defer func() {
		if err != nil {
			os.Remove(temp.Name())
		}
	}()
	_, err = temp.Write(content)
	if err == nil {
		err = temp.Chmod(0o644)
	}
	if cerr := temp.Close(); err == nil {
		err = cerr
	}
	if err == nil {
		err = os.Rename(temp.Name(), path)
	}
	if err != nil {
		return fmt.Errorf("%s: cannot write: %w; free some space or choose another folder with -o", path, reason(err))
	}
	return nil
}

// reason is the cause of a file error without the path, which the message names.
func reason(err error) error {
	var p *os.PathError
	if errors.As(err, &p) {
		return p.Err
	}
	var l *os.LinkError
	if errors.As(err, &l) {
		return l.Err
	}
	return err
}

func isInput(path string, inputs []string) (bool, string) {
	out, err := os.Stat(path)
	if err != nil {
		return false, ""
	}
	for _, in := range inputs {
		if info, err := os.Stat(in); err == nil && os.SameFile(out, info) {
			return true, in
		}
	}
	return false, ""
}

// fileName makes a lot id into a file name that is safe on every system: letters,
// digits, dot, dash and underscore stay, anything else becomes an underscore.
func fileName(lot string) string {
	name := strings.Map(func(r rune) rune {
		switch {
		case r >= 'a' && r <= 'z', r >= 'A' && r <= 'Z', r >= '0' && r <= '9', r == '-', r == '_', r == '.':
			return r
		}
		return '_'
	}, lot)
	name = strings.TrimLeft(name, ".-")
	const longest = 100
	name = name[:min(len(name), longest)]
	if name == "" {
		return "lot"
	}
	return name
}

func printSummary(w io.Writer, r *reports.Report, files []string) error {
	return text.Summary(w, r, files, isTerminal(w) && os.Getenv("NO_COLOR") == "")
}

func isTerminal(w any) bool {
	f, ok := w.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}
