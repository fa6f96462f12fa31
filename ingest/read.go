package ingest

import (
	"context"

	"kneepoint/config"
)

// Options steer reading.
type Options struct {
	Product  *config.Product         // nil: everything is found unaided
	Lot      string                  // read only this lot; "" all
	Workers  int                     // parsing goroutines; 0: GOMAXPROCS
	Progress func(done, total int64) // bytes read of all inputs, called from one goroutine; may be nil
}

// Batch is what a set of files holds: one or several lots.
type Batch struct {
	Lots   []*Lot // natural order of lot id
	Inputs []Input
}

// Read reads files into lots.
func Read(ctx context.Context, paths []string, opt Options) (*Batch, error) {
	panic("not built yet")
}
