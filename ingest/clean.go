package ingest

import (
	"context"
	"fmt"
	"math"

	"golang.org/x/sync/errgroup"
)

// eachTest works on the tests in parallel, each in one goroutine alone, and
// gives the findings in the order of the tests.
func (d *draft) eachTest(opt *Options, work func(test int) []Finding) {
	findings := make([][]Finding, len(d.tests))
	g, _ := errgroup.WithContext(context.Background())
	g.SetLimit(opt.Workers)
	for i := range d.tests {
		g.Go(func() error {
			findings[i] = work(i)
			return nil
		})
	}
	g.Wait()
	for _, f := range findings {
		d.findings = append(d.findings, f...)
	}
}

// oddCells counts the cells of one test that were no numbers, and makes plain
// NaN of them.
func (d *draft) oddCells(test int) []Finding {
	counts := map[status]int{}
	v := d.values[test]
	for i, x := range v {
		if x == x {
			continue
		}
		if st := nanStatus(x); st != cellEmpty {
			counts[st]++
		}
		v[i] = math.NaN()
	}
	var findings []Finding
	for _, k := range []struct {
		kind      status
		severity  Severity
		code      string
		one, many string
		remedy    string
	}{
		{cellBad, Warning, "unreadable-value", "cell is no number", "cells are no numbers", "correct the cells"},
		{cellInf, Warning, "not-finite", "value is infinite", "values are infinite", "find out what the tester wrote there"},
		{cellOver, Warning, "out-of-range", "cell holds a word for out of range", "cells hold a word for out of range",
			"export the tester's largest value instead, so that it counts as a bound"},
		{cellMissing, Info, "missing-word", "cell holds a word for no reading", "cells hold a word for no reading", ""},
	} {
		n := counts[k.kind]
		if n == 0 {
			continue
		}
		at, text := d.from.firstOdd(d.slots[test], k.kind, d.files)
		first := ""
		if text != "" {
			first = ", first " + quote(text)
		}
		findings = append(findings, Finding{Code: k.code, Severity: k.severity, Dice: n, Remedy: k.remedy,
			Text: fmt.Sprintf("%stest %s: %d %s%s; taken as missing", at, d.tests[test].name, n, plural(n, k.one, k.many), first)})
	}
	return findings
}

// missing counts the readings of one test that are missing in the end.
func (d *draft) missing(test int) []Finding {
	n := 0
	for _, v := range d.values[test] {
		if v != v {
			n++
		}
	}
	if n == 0 {
		return nil
	}
	severity := Info
	if n == d.n {
		severity = Warning
	}
	return []Finding{{Code: "missing", Severity: severity, Dice: n, Text: fmt.Sprintf("test %s: %d of %d dice have no reading", d.tests[test].name, n, d.n)}}
}
