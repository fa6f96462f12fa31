package ingest

import "fmt"

func (d *draft) sentinels(opt *Options) {}

func (d *draft) clamps(opt *Options) [][]int8 { return make([][]int8, len(d.tests)) }

func (d *draft) coordinates() {}

// countMissing counts the readings that are missing in the end.
func (d *draft) countMissing() {
	for t := range d.tests {
		n := 0
		for _, v := range d.values[t] {
			if v != v {
				n++
			}
		}
		if n > 0 {
			d.note(Info, "missing", fmt.Sprintf("test %s: %d of %d dice have no reading", d.tests[t].name, n, d.n), "", n)
		}
	}
}
