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

// Read reads files into lots. Several files are read in the order given, as if
// they were one. The same files give the same batch, whatever Workers is.
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
	total, done := int64(0), int64(0)
	sizes := make([]int64, len(paths))
	for i, p := range paths {
		src, err := openSource(p, nil)
		if err != nil {
			return nil, err
		}
		sizes[i] = src.size
		total += src.size
		src.close()
	}
	t := &readings{sch: newSchema()}
	for i, p := range paths {
		progress := func(read int64) {
			if opt.Progress != nil {
				opt.Progress(done+min(read, sizes[i]), total)
			}
		}
		d, err := readFile(ctx, p, i, t.sch, opt, progress)
		if err != nil {
			return nil, err
		}
		done += sizes[i]
		t.files = append(t.files, d)
	}
	for i := range t.files {
		for j := range t.files[:i] {
			if t.files[i].input.SHA256 == t.files[j].input.SHA256 {
				t.note(i, Warning, "same-file-twice", fmt.Sprintf("%s and %s hold the same bytes; the rows of the second count as duplicates", paths[j], paths[i]),
					"name each file once", 0)
			}
		}
	}
	return t, nil
}
