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

// eachWafer works on the wafers in parallel, each in one goroutine alone. What
// work finds must go to a place of its own by wafer.
func (d *draft) eachWafer(work func(k int, w Wafer)) {
	const few = 1 << 14 // dice that are not worth a goroutine
	if d.workers <= 1 || d.n < few {
		for k, w := range d.wafers {
			work(k, w)
		}
		return
	}
	var g errgroup.Group
	g.SetLimit(d.workers)
	for k, w := range d.wafers {
		g.Go(func() error {
			work(k, w)
			return nil
		})
	}
	g.Wait()
}

// extremes are what one pass tells of a column. Most columns hold nothing that
// needs a closer look, and this is how that is known.
type extremes struct {
	n             int // values
	least, most   float64
	nLeast, nMost int // copies of them
}

// survey takes that pass; odd, if not nil, counts the cells that were no
// numbers, and makes plain NaN of them, but for bounds.
func survey(v []float64, odd map[status]int) extremes {
	e := extremes{least: math.Inf(1), most: math.Inf(-1)}
	between, least, most := 0, e.least, e.most // nearly all are counted here, out of memory
	for i, x := range v {
		if x > least && x < most {
			between++
			continue
		}
		if x != x {
			if odd != nil {
				st := nanStatus(x)
				if st != cellEmpty {
					odd[st]++
				}
				if st != cellOver && st != cellUnder && st != cellBound {
					v[i] = math.NaN() // those are still to be worked out
				}
			}
			continue
		}
		e.n++
		if x <= e.least {
			if x < e.least {
				e.least, e.nLeast = x, 0
			}
			e.nLeast++
		}
		if x >= e.most {
			if x > e.most {
				e.most, e.nMost = x, 0
			}
			e.nMost++
		}
		least, most = e.least, e.most
	}
	e.n += between
	return e
}

// numbers is the first look at a column: odd cells, sentinels and bounds.
func (d *draft) numbers(test int) []Finding {
	odd := map[status]int{}
	d.seen[test] = survey(d.values[test], odd)
	findings := append(d.carriedOf(test), d.oddCells(test, odd)...)
	if s := d.sentinels(test); len(s) > 0 {
		d.seen[test] = survey(d.values[test], nil)
		findings = append(findings, s...)
	}
	return append(findings, d.overRange(test, odd)...)
}

// bounds is the second look, at the dice that count: missing and censored
// values.
func (d *draft) bounds(test int) ([]int8, []Finding) {
	if d.compacted {
		d.seen[test] = survey(d.values[test], nil)
	}
	marks, findings := d.clamps(test)
	return marks, append(d.missing(test), findings...)
}

// oddCells tells of the cells of one test that were no numbers.
func (d *draft) oddCells(test int, counts map[status]int) []Finding {
	var findings []Finding
	for _, k := range []struct {
		kind      status
		severity  Severity
		code      string
		one, many string
		remedy    string
	}{
		{cellBad, Warning, "unreadable-value", "cell is no number", "cells are no numbers", "correct the cells"},
		{cellInvalid, Warning, "invalid-result", "result is flagged by the tester as not to be used", "results are flagged by the tester as not to be used",
			"look at the tester's alarms for this test"},
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
		unjudged := ""
		if k.kind != cellMissing {
			unjudged = d.unjudged(test, n)
		}
		findings = append(findings, Finding{Code: k.code, Severity: k.severity, Dice: n, Remedy: k.remedy,
			Text: fmt.Sprintf("%stest %s: %d %s%s; taken as missing%s", at, d.tests[test].name, n, plural(n, k.one, k.many), first, unjudged)})
	}
	return findings
}

// unjudged says what is lost with readings of a test that has limits.
func (d *draft) unjudged(test, n int) string {
	if t := &d.tests[test]; t.lower != t.lower && t.upper != t.upper {
		return ""
	}
	return plural(n, ", so that this die cannot be judged on this test", ", so that these dice cannot be judged on this test")
}

// missing counts the readings of one test that are missing in the end.
func (d *draft) missing(test int) []Finding {
	n := d.n - d.seen[test].n
	if n == 0 {
		return nil
	}
	severity := Info
	if n == d.n {
		severity = Warning
	}
	return []Finding{{Code: "missing", Severity: severity, Dice: n, Text: fmt.Sprintf("test %s: %d of %d dice have no reading", d.tests[test].name, n, d.n)}}
}
