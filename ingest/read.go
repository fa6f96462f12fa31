package ingest

import (
	"context"
	"fmt"
	"runtime"

	"kneepoint/config"
)

// Options steer reading.
type Options struct {
	Product  *config.Product         // nil: everything is found unaided
	Lot      string                  // read only this lot; "" all
	History  *History                // attributes of wafers, from ReadHistory; may be nil
	Retest   Retest                  // which measurement of a retested die counts; "" last
	Workers  int                     // parsing goroutines; 0: GOMAXPROCS
	Progress func(done, total int64) // bytes read of all inputs, called from one goroutine; may be nil
	SkipBad  bool                    // of several files, those that cannot be read become findings ("file-not-read") instead of an error

	block   int  // bytes a block; 0: blockSize
	careful bool // keep the fast path out
}

// Retest says which measurement of a die that was measured several times counts.
type Retest string

const (
	RetestLast  Retest = "last"  // the last valid one: what was found in the end
	RetestFirst Retest = "first" // the first valid one
	RetestBest  Retest = "best"  // the last passing one if any passes, else the last; ships marginal parts
)

// Batch is what a set of files holds: one or several lots.
type Batch struct {
	Lots     []*Lot // natural order of lot id
	Inputs   []Input
	Findings []Finding // about the files; each lot repeats those of its own files
	Tally    Tally

	layouts []*layout // by input
}

// Tally accounts for every row that was read. Of a wide table each row used is
// one measurement of a die; of a long one, one reading of a measurement. Always
//
//	Rows = Used + the sum of Discarded
//	Measurements = Dice + Earlier + Duplicates + Joined
//
// and for wide tables Used = Measurements.
type Tally struct {
	Rows         int // data rows in the files
	Used         int
	Discarded    map[string]int // by reason; rows of lots that were not asked for are "other-lot"
	Measurements int
	Dice         int // each counted once, in its measurement that counts
	Earlier      int // other measurements of retested dice
	Duplicates   int // measurements that repeat another one exactly
	Joined       int // rows whose readings were joined to another row of the same die
}

// Read reads files into lots. A path is a file in one of the formats of the
// package, a folder, a pattern (lot-*.csv) or a zip archive of such files.
// Several files are read as if they were one, in the order of their start times
// where all of them have one, else in the order given; those of a folder, pattern
// or archive in natural order of their names. The same files give the same batch,
// whatever Workers is.
//
// A file that cannot be read is an error that names it, however many others
// there are, unless SkipBad says otherwise.
//
// What stands in the way of reading is an *Error; what was found in data that
// could be read is in the lots' findings. When a packed file is damaged or a
// disk fails after some rows, the rows before are kept and a finding says what
// is missing.
func Read(ctx context.Context, paths []string, opt Options) (*Batch, error) {
	if len(paths) == 0 {
		return nil, &Error{File: "input", What: "no file was named", Remedy: "name at least one data file"}
	}
	switch opt.Retest {
	case "":
		opt.Retest = RetestLast
	case RetestLast, RetestFirst, RetestBest:
	default:
		return nil, &Error{File: "retest policy " + quote(string(opt.Retest)), What: "there is no such policy", Remedy: "use last, first or best"}
	}
	if opt.Workers <= 0 {
		opt.Workers = runtime.GOMAXPROCS(0)
	}
	if opt.block <= 0 {
		opt.block = blockSize
	}
	t, err := readFiles(ctx, paths, &opt)
	if err != nil {
		return nil, err
	}
	batch, err := t.lots(ctx, &opt)
	if err != nil || opt.History == nil {
		return batch, err
	}
	for _, l := range batch.Lots {
		opt.History.apply(l)
	}
	return batch, nil
}

// readFiles reads all files into one table.
func readFiles(ctx context.Context, paths []string, opt *Options) (*readings, error) {
	found, err := findInputs(paths)
	if err != nil {
		return nil, err
	}
	defer found.close()
	t := &readings{sch: newSchema()}
	for _, f := range found.notes {
		t.findings = append(t.findings, fileFinding{all, f})
	}
	total, done := int64(0), int64(0)
	for _, in := range found.inputs {
		total += in.size
	}
	for _, in := range found.inputs {
		progress := func(read int64) {
			if opt.Progress != nil {
				opt.Progress(done+min(read, in.size), total)
			}
		}
		d, err := readInput(ctx, in, len(t.files), t.sch, opt, progress)
		if err != nil {
			if opt.SkipBad && t.skipped(err, len(found.inputs)) {
				continue
			}
			return nil, err
		}
		done += in.size
		d.container = in.container
		t.files = append(t.files, d)
	}
	if len(t.files) == 0 {
		return nil, &Error{File: paths[0], What: "no file could be read", Remedy: "look at each by itself"}
	}
	t.byTime()
	t.identify()
	for i := range t.files {
		for j := range t.files[:i] {
			if t.files[i].input.SHA256 == t.files[j].input.SHA256 {
				t.note(i, Warning, "same-file-twice", fmt.Sprintf("%s and %s hold the same bytes; the rows of the second count as duplicates",
					t.files[j].input.File, t.files[i].input.File), "name each file once", 0)
			}
		}
	}
	return t, nil
}
