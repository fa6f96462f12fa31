package wafermap

import (
	"slices"
	"testing"
)

func TestStack(t *testing.T) {
	s := NewStack()
	s.Add([]int32{1, 2, 1, Missing, 1}, []int32{1, 1, 0, 3, 1}, []bool{true, false, true, true, false}) // (1, 1) retested: passes
	s.Add([]int32{1, 2, 1000000000, 1}, []int32{1, 1, -1000000000, 1}, []bool{false, true, true, true}) // (1, 1) retested: fails
	s.Add(nil, nil, nil)
	want := []Position{{1000000000, -1000000000, 1, 1}, {1, 0, 1, 1}, {1, 1, 2, 1}, {2, 1, 2, 1}}
	if got := s.Positions(); !slices.Equal(got, want) {
		t.Errorf("positions %v, want %v", got, want)
	}
	if s.Wafers != 3 || s.Missing != 1 || s.Duplicates != 2 {
		t.Errorf("%d wafers, %d missing, %d duplicates; want 3, 1, 2", s.Wafers, s.Missing, s.Duplicates)
	}
	if r := want[2].Rate(); r != 0.5 {
		t.Errorf("rate %v", r)
	}
	if got := NewStack().Positions(); len(got) != 0 {
		t.Errorf("an empty stack has %d positions", len(got))
	}
}

// Against plain maps, on wafers that shift and shrink.
func TestStackAgainstMaps(t *testing.T) {
	type place struct{ x, y int32 }
	tested, failing := map[place]int{}, map[place]int{}
	s := NewStack()
	for w := range uint64(12) {
		x, y := disc(3 + float64(w))
		fail := scatter(len(x), 0.3, w)
		for i := range x {
			x[i] += int32(w)
			tested[place{x[i], y[i]}]++
			if fail[i] {
				failing[place{x[i], y[i]}]++
			}
		}
		s.Add(x, y, fail)
	}
	if len(s.X) != len(tested) {
		t.Fatalf("%d positions, want %d", len(s.X), len(tested))
	}
	last := Position{Y: -1 << 30}
	for _, p := range s.Positions() {
		k := place{p.X, p.Y}
		if p.Tested != tested[k] || p.Failing != failing[k] {
			t.Errorf("%v: %d of %d, want %d of %d", k, p.Failing, p.Tested, failing[k], tested[k])
		}
		if p.Y < last.Y || p.Y == last.Y && p.X <= last.X {
			t.Errorf("%v after %v", p, last)
		}
		last = p
	}
}
