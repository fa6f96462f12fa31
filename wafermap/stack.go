package wafermap

import (
	"cmp"
	"slices"
)

// Stack lays wafers on each other: for each die position it counts on how many
// wafers it was tested and on how many it failed. The slices go together,
// positions in order of first appearance.
type Stack struct {
	X, Y            []int32
	Tested, Failing []int32

	Wafers, Missing, Duplicates int // wafers added; rows left out, as in Grid

	ix   *index
	last []int32 // wafer number that last counted the position
	bad  []bool  // and what it counted
}

// NewStack returns an empty stack.
func NewStack() *Stack { return &Stack{} }

// Add lays one wafer on the stack. A position that occurs in several rows counts
// once, with the last row's result.
func (s *Stack) Add(x, y []int32, fail []bool) {
	if len(x) != len(y) || len(x) != len(fail) {
		panic("wafermap: x, y and fail differ in length")
	}
	if s.ix == nil || len(s.X) == 0 {
		s.ix = newIndex(x, y, 2) // later wafers' dice outside go to its hash table
	}
	s.Wafers++
	wafer := int32(s.Wafers)
	for i := range x {
		if !placed(x[i], y[i]) {
			s.Missing++
			continue
		}
		k := s.ix.get(int(x[i]), int(y[i]))
		if k < 0 {
			k = len(s.X)
			s.ix.put(int(x[i]), int(y[i]), int32(k))
			s.X, s.Y = append(s.X, x[i]), append(s.Y, y[i])
			s.Tested, s.Failing = append(s.Tested, 0), append(s.Failing, 0)
			s.last, s.bad = append(s.last, 0), append(s.bad, false)
		}
		if s.last[k] == wafer {
			s.Duplicates++
			if s.bad[k] {
				s.Failing[k]--
			}
		} else {
			s.Tested[k]++
			s.last[k] = wafer
		}
		if s.bad[k] = fail[i]; fail[i] {
			s.Failing[k]++
		}
	}
}

// Position is one die position over the wafers of a stack.
type Position struct {
	X, Y            int32
	Tested, Failing int
}

// Rate is the share of wafers on which the position fails.
func (p Position) Rate() float64 { return float64(p.Failing) / float64(p.Tested) }

// Positions returns the die positions sorted by y, then x.
func (s *Stack) Positions() []Position {
	out := make([]Position, len(s.X))
	for i := range out {
		out[i] = Position{s.X[i], s.Y[i], int(s.Tested[i]), int(s.Failing[i])}
	}
	slices.SortFunc(out, func(a, b Position) int { return cmp.Or(cmp.Compare(a.Y, b.Y), cmp.Compare(a.X, b.X)) })
	return out
}
