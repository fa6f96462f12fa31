package dist

import "errors"

// Counts says what a fit rests on.
type Counts struct {
	// N counts readings: exact ones and bounds. Left counts "at most", Right "at
	// least", Between readings known to lie between two values.
	N, Left, Right, Between int
}

// Censored is the number of readings that are only bounds.
func (c Counts) Censored() int { return c.Left + c.Right + c.Between }

// Why a fit cannot be made.
var (
	ErrNoValues    = errors.New("no values")
	ErrTooFew      = errors.New("fewer than two different exact values")
	ErrInfinite    = errors.New("an infinite value")
	ErrNotPositive = errors.New("a value that is not positive")
	ErrOutside     = errors.New("a value outside the limits that readings were screened by")
	ErrNarrow      = errors.New("a spread so small that a gamma distribution is a normal one")
	ErrNoFit       = errors.New("the likelihood has no maximum at a positive spread")
)
