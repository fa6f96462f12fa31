package ingest

import (
	"context"
	"fmt"

	"kneepoint/config"
)

// readings are the measurements of all files in columns, before cleaning: one row
// a measurement of one die, in the order of the files.
type readings struct {
	sch      *schema
	files    []*fileData
	chunks   []*chunk        // wide ones
	units    [][]config.Unit // of the values, by test of the schema and file
	si       map[[2]int]bool // test and file whose values are SI already
	given    []testInfo      // tests of a Table in memory
	findings []fileFinding
	tally    Tally
	// longColumns is what the rows of all long files say of their tests.
	longColumns []testColumn
	timed       bool // the files were put in the order of their start times
	siteIsDie   bool // a long table without coordinates or parts: the site tells dice apart
}

// fileFinding is a finding about one file, or all.
type fileFinding struct {
	file int
	Finding
}

// testInfo is what files and product say of one test of a lot.
type testInfo struct {
	name         string
	product      int           // index in the product file, -1
	fileUnits    []config.Unit // the different units that files have its values in
	unit         config.Unit   // for showing
	lower, upper float64       // SI
	limitsFrom   string
	condition    string
	measures     string
	clamp, floor float64
	number       int
	place        int     // in the order of the data
	declared     bool    // a file gives it a unit or limits, or the product names it
	files        int     // that have it
	cleaned      int     // of them, files of convert: their sentinels are gone
	pile         [2]bool // clamp, floor were found as a pile-up
}

// note adds a finding about one file, or about all.
func (t *readings) note(file int, s Severity, code, text, remedy string, dice int) {
	t.findings = append(t.findings, fileFinding{file, Finding{Code: code, Severity: s, Text: text, Remedy: remedy, Dice: dice}})
}

// lots turns the table into a batch.
func (t *readings) lots(ctx context.Context, opt *Options) (*Batch, error) {
	t.tally.Discarded = map[string]int{}
	for i := range t.files {
		t.fileFindings(i)
	}
	t.pivot()
	t.spread()
	t.settleUnits(opt.Product)
	o, err := t.arrange(opt)
	if err != nil {
		return nil, err
	}
	b := &Batch{}
	for _, f := range t.findings {
		b.Findings = append(b.Findings, f.Finding)
	}
	for _, f := range t.files {
		b.Inputs, b.layouts = append(b.Inputs, f.input), append(b.layouts, f.layout)
	}
	drafts, err := t.gather(ctx, o, opt)
	if err != nil {
		return nil, err
	}
	if err := t.unknownProduct(drafts, opt.Product); err != nil {
		return nil, err
	}
	t.constants(drafts)
	for _, d := range drafts {
		l := d.lot(opt)
		b.Lots = append(b.Lots, l)
		t.tally.Measurements += d.measurements - d.untested
		if d.untested > 0 {
			t.tally.Used -= d.untestedRows
			t.tally.Discarded["untested"] += d.untestedRows
		}
		t.tally.Dice += l.Len()
		t.tally.Earlier += len(l.earlier.Of)
		t.tally.Duplicates += d.duplicates
		t.tally.Joined += d.joined
	}
	b.Tally = t.tally
	b.Tally.check(t)
	return b, nil
}

// check holds the account of rows; a wrong one is a defect of this package.
func (y *Tally) check(t *readings) {
	sum := y.Used
	for _, n := range y.Discarded {
		sum += n
	}
	wide := true
	for _, f := range t.files {
		wide = wide && (f.layout == nil || !f.layout.long)
	}
	if sum != y.Rows || y.Measurements != y.Dice+y.Earlier+y.Duplicates+y.Joined || wide && y.Used != y.Measurements {
		panic(fmt.Sprintf("ingest: rows are not accounted for: %+v", *y))
	}
}
