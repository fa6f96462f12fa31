package ingest

import (
	"strconv"

	"kneepoint/ingest/stdf"
)

// partIDs keeps PART_ID, but for those that merely count the parts of the file
// or of the wafer: millions of different texts that say nothing.
type partIDs struct {
	n       int
	places  []int32 // of each part within its wafer, while ids may count those
	onWafer []int32 // parts so far, by wafer
	other   [2]bool // some id is no count of the file's, of the wafer's parts
	text    globalText
	codes   []int32 // nil as long as ids count
}

// plainCount reads a count as one writes it: digits, no zero in front.
func plainCount(b []byte) (n int, ok bool) {
	if len(b) == 0 || len(b) > 18 || b[0] == '0' {
		return 0, false
	}
	neg := b[0] == '-' // of no use, and yet a number
	if neg {
		b = b[1:]
	}
	for _, c := range b {
		if c-'0' > 9 {
			return 0, false
		}
		n = 10*n + int(c-'0')
	}
	if neg {
		n = -n
	}
	return n, len(b) > 0
}

func (d *partIDs) add(wafer int, raw []byte) {
	if d.codes != nil {
		d.codes = append(d.codes, d.code(raw))
		return
	}
	for len(d.onWafer) <= wafer {
		d.onWafer = append(d.onWafer, 0)
	}
	d.n++
	d.onWafer[wafer]++
	place := d.onWafer[wafer]
	k, plain := plainCount(raw)
	wereFile := !d.other[0]
	d.other[0] = d.other[0] || !plain || k != d.n
	d.other[1] = d.other[1] || !plain || k != int(place)
	if !d.other[0] || !d.other[1] {
		d.places = append(d.places, place)
		return
	}
	// No counts after all; those passed over are known.
	d.codes = make([]int32, 0, d.n)
	for i, k := range d.places {
		if wereFile {
			k = int32(i + 1)
		}
		d.codes = append(d.codes, d.text.code(strconv.Itoa(int(k))))
	}
	d.places = nil
	d.codes = append(d.codes, d.code(raw))
}

func (d *partIDs) code(raw []byte) int32 {
	if len(raw) > 0 {
		if id := stdf.Text(raw); id != "" {
			return d.text.code(id)
		}
	}
	return -1
}
