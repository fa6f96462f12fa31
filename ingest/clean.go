package ingest

import (
	"context"
	"fmt"

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
