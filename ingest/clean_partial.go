package ingest

import "fmt"

// What belongs to a retest that measured only some of the tests again.

// fillPartial gives the row that counts the readings that it lacks, each from
// the latest earlier row of the die that has one: a test that was not measured
// again keeps its last reading, as a failing one would otherwise be forgotten by
// measuring something else.
//
// Blanks that a stop at a fail leaves are no such thing: where the row's bin or
// flag fails the die, or its last reading breaks a limit, what comes after that
// reading in the order of the file was not measured on purpose and stays blank.
func (s *retesting) fillPartial(own []int32, chosen int32) {
	d := s.d
	stop := len(d.values) // place from which blanks stay
	if last, at := d.lastReading(chosen); s.verdict(chosen) < 0 || s.verdict(chosen) == 0 && last >= 0 && d.breaks(last, chosen) {
		stop = at + 1
	}
	filled := false
	for t := range d.values {
		if d.has(t, chosen) || d.tests[t].place >= stop {
			continue
		}
		for i := len(own) - 1; i >= 0; i-- {
			r := own[i]
			if !d.earlierThan(r, chosen) || !d.has(t, r) {
				continue
			}
			d.copyReading(t, r, chosen)
			filled = true
			break
		}
	}
	if filled {
		s.partial++
	}
}

// has says whether a measurement has a reading of a test.
func (d *draft) has(test int, r int32) bool { v := d.values[test][r]; return v == v }

// earlierThan says whether a measurement of a die came before another one.
func (d *draft) earlierThan(a, b int32) bool {
	if d.rank != nil {
		return d.rank[a] < d.rank[b]
	}
	return a < b
}

// lastReading finds the last test of the file that a measurement has a reading
// of, and its place; -1 when it has none.
func (d *draft) lastReading(r int32) (test, place int) {
	test, place = -1, -1
	for t := range d.values {
		if p := d.tests[t].place; p > place && d.has(t, r) {
			test, place = t, p
		}
	}
	return test, place
}

// breaks says whether a reading is outside the test's limits.
func (d *draft) breaks(test int, r int32) bool {
	v := d.values[test][r]
	return v < d.tests[test].lower || v > d.tests[test].upper
}

// verdict is what the file itself says of a measurement: 1 pass, -1 fail, 0
// nothing.
func (s *retesting) verdict(r int32) int {
	d := s.d
	sign := func(pass bool) int {
		if pass {
			return 1
		}
		return -1
	}
	bin := d.ints[intHardBin]
	if bin != nil && bin[r] != Missing && len(s.bins.Pass) > 0 {
		return sign(s.bins.PassBin(int(bin[r])))
	}
	if d.pass != nil && d.pass[r] >= 0 {
		return sign(d.pass[r] == 1)
	}
	if bin != nil && bin[r] != Missing {
		return sign(s.bins.PassBin(int(bin[r])))
	}
	return 0
}

func (s *retesting) reportPartial() {
	if s.partial == 0 {
		return
	}
	s.d.note(Info, "partial-retest", fmt.Sprintf("%d %s measured again in some tests only; tests that were not measured again count with their latest earlier reading",
		s.partial, plural(s.partial, "die was", "dice were")), "", s.partial)
	s.d.compacted = true // the columns changed
}
