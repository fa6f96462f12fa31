package config

import (
	"fmt"
	"strings"
)

// Problem is one thing wrong in a product or settings file.
type Problem struct {
	Key    string // path of the key: device.epi.thickness_um.upper, tests[3].unit (the fourth test)
	What   string // what is wrong
	Remedy string // what would be right
}

// Problems is the error for a file that can be read but not used: everything
// that is wrong with it, in the order of the schema (see the package comment),
// unknown keys of a block before what its known keys say.
type Problems struct {
	File string
	List []Problem
}

// maxProblemLines keeps a file that is nothing of the kind from flooding a terminal.
const maxProblemLines = 100

// Error has a line a problem, "file: key.path: what is wrong; what would be
// right", and after a hundred of them a line with the count of the others.
func (p *Problems) Error() string {
	var b strings.Builder
	for i, one := range p.List {
		if i > 0 {
			b.WriteByte('\n')
		}
		if i == maxProblemLines {
			fmt.Fprintf(&b, "%s: and %d more problems", p.File, len(p.List)-i)
			break
		}
		fmt.Fprintf(&b, "%s: %s: %s; %s", p.File, one.Key, one.What, one.Remedy)
	}
	return b.String()
}

// FileError is the error for a file that cannot be read at all, or whose text
// is no YAML, TOML or JSON.
type FileError struct {
	File   string
	Line   int // 0 when no line is to blame
	What   string
	Remedy string
	Err    error // what the system or the decoder said; may be nil
}

// Error is one line: "file:line: what is wrong; what to do".
func (e *FileError) Error() string {
	if e.Line > 0 {
		return fmt.Sprintf("%s:%d: %s; %s", e.File, e.Line, e.What, e.Remedy)
	}
	return fmt.Sprintf("%s: %s; %s", e.File, e.What, e.Remedy)
}

func (e *FileError) Unwrap() error { return e.Err }

// nearest returns the known word that a misspelt one was probably meant to be,
// without regard to case: the one at the smallest edit distance of at most a
// third of its letters, else the one that holds it or is held by it (diameter
// for diameter_mm). The first of equals; "" when none is near.
func nearest(word string, known []string) string {
	low := strings.ToLower(word)
	if len(low) > 64 {
		return "" // no key is that long, and the distance takes quadratic time
	}
	best, least := "", max(1, len(low)/3)
	for _, k := range known {
		if d := editDistance(low, strings.ToLower(k)); d < least || d == least && best == "" {
			best, least = k, d
		}
	}
	if best != "" {
		return best
	}
	for _, k := range known {
		lk := strings.ToLower(k)
		if min(len(low), len(lk)) >= 4 && (strings.Contains(lk, low) || strings.Contains(low, lk)) {
			return k
		}
	}
	return ""
}

// editDistance counts the insertions, deletions, substitutions and swaps of
// neighbours that make b of a: the optimal string alignment distance, after
// Damerau, Communications of the ACM 7 (1964) 171.
func editDistance(a, b string) int {
	s, t := []rune(a), []rune(b)
	d := make([][]int, len(s)+1)
	for i := range d {
		d[i] = make([]int, len(t)+1)
		d[i][0] = i
	}
	for j := range t {
		d[0][j+1] = j + 1
	}
	for i := 1; i <= len(s); i++ {
		for j := 1; j <= len(t); j++ {
			cost := 1
			if s[i-1] == t[j-1] {
				cost = 0
			}
			d[i][j] = min(d[i-1][j]+1, d[i][j-1]+1, d[i-1][j-1]+cost)
			if i > 1 && j > 1 && s[i-1] == t[j-2] && s[i-2] == t[j-1] {
				d[i][j] = min(d[i][j], d[i-2][j-2]+1)
			}
		}
	}
	return d[len(s)][len(t)]
}
