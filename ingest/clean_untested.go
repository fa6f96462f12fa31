package ingest

import (
	"fmt"

	"kneepoint/config"
)

// untested takes dice out that have no bin, no pass flag and no reading in any
// of their rows: they are places on the map, not tested dice, and would count as
// good ones where no limit is broken. A lot in which nothing was tested is left
// as it is.
func (s *retesting) untested() {
	d := s.d
	dice, gone := s.withoutReading()
	if len(gone) == 0 || len(gone) == dice {
		return
	}
	if s.keep == nil {
		s.keep = make([]int32, d.n)
		for i := range s.keep {
			s.keep[i] = int32(i)
		}
	}
	s.gone = len(gone)
	for r, k := range s.keep {
		if k < 0 || !gone[k] {
			continue
		}
		if int32(r) != k {
			s.extra, s.empty = s.extra-1, s.empty-1
		}
		s.keep[r] = untestedRow
		d.untested++
		if d.untestedRows++; d.weight != nil {
			d.untestedRows += int(d.weight[r]) - 1
		}
	}
}

// withoutReading counts the dice and gives those that have nothing in the
// measurement that counts.
func (s *retesting) withoutReading() (dice int, gone map[int32]bool) {
	d := s.d
	count, without := make([]int, len(d.wafers)), make([][]int32, len(d.wafers))
	d.eachWafer(func(k int, w Wafer) {
		n := 0
		for r := int32(w.Lo); r < int32(w.Hi); r++ {
			if s.keep != nil && s.keep[r] != r {
				continue
			}
			n++
			if !d.valid(r) {
				without[k] = append(without[k], r)
			}
		}
		count[k] = n
	})
	gone = map[int32]bool{}
	for k, rows := range without {
		dice += count[k]
		for _, r := range rows {
			gone[r] = true
		}
	}
	return dice, gone
}

func (s *retesting) reportUntested() {
	if s.gone == 0 {
		return
	}
	s.d.note(Warning, "untested", fmt.Sprintf("%d %s neither bin nor pass flag nor any reading and %s as not tested; left out", s.gone, plural(s.gone, "die has", "dice have"),
		plural(s.gone, "counts", "count")), "find out why these dice were not tested; if they failed, give them a bin", s.gone)
}

// unknownProduct is the error of a product file that has none of the tests.
func (t *readings) unknownProduct(drafts []*draft, product *config.Product) error {
	if product == nil || len(product.Tests) == 0 {
		return nil
	}
	var have []string
	for _, d := range drafts {
		for i := range d.tests {
			if d.tests[i].product >= 0 {
				return nil
			}
			if len(drafts) == 1 || len(have) < 40 {
				have = append(have, d.tests[i].name)
			}
		}
	}
	if len(have) == 0 {
		return nil // bins only
	}
	var want []string
	for i := range product.Tests {
		want = append(want, product.Tests[i].Name)
	}
	return &Error{File: t.files[0].input.File, What: fmt.Sprintf("none of the product file's tests is in the data; the product file has %s, the data have %s", list(want, 12), list(have, 12)),
		Remedy: "use the product file of this product, or correct the names of its tests"}
}
