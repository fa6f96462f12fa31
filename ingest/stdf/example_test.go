package stdf_test

import (
	"bytes"
	"fmt"

	"kneepoint/ingest/stdf"
)

// Two sites tested at once: their results come mixed, and the second record of
// the test leaves unit and limits out.
func ExampleParts() {
	var file bytes.Buffer
	w := stdf.NewWriter(&file, stdf.LittleEndian)
	for _, rec := range []stdf.Record{
		&stdf.FAR{},
		&stdf.MIR{LotID: "LOT-7", Temperature: "25"},
		&stdf.WIR{Head: 1, WaferID: "03"},
		&stdf.PIR{Head: 1, Site: 1},
		&stdf.PIR{Head: 1, Site: 2},
		&stdf.PTR{Number: 1030, Head: 1, Site: 1, Result: 1.2e-9, Text: "ICBO", Optional: &stdf.Optional{
			Flag: stdf.NoLow | stdf.NoLowSpec | stdf.NoHighSpec, ResScale: 9, HiScale: 9, HiLimit: 5e-9, Units: "A"}},
		&stdf.PTR{Number: 1030, Head: 1, Site: 2, Flag: stdf.Failed, Result: 7.5e-9},
		&stdf.PRR{Head: 1, Site: 2, Flag: stdf.PartFailed, HardBin: 5, SoftBin: stdf.NoBin, X: 11, Y: -4},
		&stdf.PRR{Head: 1, Site: 1, HardBin: 1, SoftBin: stdf.NoBin, X: 10, Y: -4},
		&stdf.MRR{},
	} {
		if err := w.Write(rec); err != nil {
			fmt.Println(err)
		}
	}
	w.Flush()

	p := stdf.NewParts(stdf.NewReader(&file))
	for p.Scan() {
		part := p.Part()
		fmt.Printf("wafer %s die %d,%d site %d bin %d pass %d\n", part.WaferID, part.X, part.Y, part.Site, part.HardBin, part.Pass())
		for _, r := range part.Results {
			test := p.Tests()[r.Test]
			l := test.LimitsOf(&r)
			shown := r.Value() * stdf.DisplayFactor(l.Units, l.ResScale)
			fmt.Printf("  %s %.1f %s, at most %g %s\n", test.Text, shown, l.DisplayUnit(), stdf.Decimal(l.Upper), l.Units)
		}
	}
	fmt.Println(p.Runs()[0].MIR.LotID, p.Err(), len(p.Damages()))
	// Output:
	// wafer 03 die 11,-4 site 2 bin 5 pass 0
	//   ICBO 7.5 nA, at most 5e-09 A
	// wafer 03 die 10,-4 site 1 bin 1 pass 1
	//   ICBO 1.2 nA, at most 5e-09 A
	// LOT-7 <nil> 0
}

// A file that was cut keeps its whole parts and says where it ends.
func ExampleReader_damages() {
	var file bytes.Buffer
	w := stdf.NewWriter(&file, stdf.BigEndian)
	w.Write(&stdf.FAR{})
	w.Write(&stdf.PIR{Head: 1, Site: 1})
	w.Write(&stdf.PTR{Number: 1, Head: 1, Site: 1, Result: 2.5, Text: "VCESAT"})
	w.Flush()
	file.Truncate(file.Len() - 3)

	r := stdf.NewReader(&file)
	for r.Scan() {
		fmt.Println(r.Offset(), r.Record().Kind())
	}
	fmt.Println(r.Err())
	for _, d := range r.Damages() {
		fmt.Println(d.Kind, d.Offset, d.Text)
	}
	// Output:
	// 0 FAR
	// 6 PIR
	// <nil>
	// cut-short 12 the file ends at byte 33 inside a PTR record that wants 3 bytes more; the records before byte 12 are whole
}
