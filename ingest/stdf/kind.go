package stdf

import "encoding/binary"

// Kind is a record type. The zero Kind is a type that this package does not
// know.
type Kind uint8

const (
	Unknown Kind = iota

	// The types that Scan delivers.
	KindFAR
	KindATR
	KindMIR
	KindMRR
	KindPCR
	KindHBR
	KindSBR
	KindPMR
	KindPGR
	KindRDR
	KindSDR
	KindWIR
	KindWRR
	KindWCR
	KindPIR
	KindPRR
	KindTSR
	KindPTR
	KindMPR
	KindFTR
	KindBPS
	KindEPS
	KindGDR
	KindDTR

	// Types known by name only: skipped, counted, and good evidence that a
	// chain of headers is a real one. PLR is of V4, the others were added to it
	// in 2007 for scan test.
	KindPLR
	KindVUR
	KindPSR
	KindNMR
	KindCNR
	KindSSR
	KindCDR
	KindSTR

	kinds     // how many there are
	delivered = KindDTR
)

// form is what a header can say of a kind: its code, and the shortest and the
// longest body that the layout allows. The shortest ends after the fields
// without which the record is of no use.
type form struct {
	name     string
	typ, sub uint8
	min, max int
}

const cn = 256 // the longest C*n or B*n, with its length byte

var forms = [kinds]form{
	Unknown: {"?", 0, 0, 0, 0},
	KindFAR: {"FAR", 0, 10, 2, 2},
	KindATR: {"ATR", 0, 20, 4, 4 + cn},
	KindMIR: {"MIR", 1, 10, 8, 15 + 30*cn},
	KindMRR: {"MRR", 1, 20, 4, 5 + 2*cn},
	KindPCR: {"PCR", 1, 30, 6, 22},
	KindHBR: {"HBR", 1, 40, 8, 9 + cn},
	KindSBR: {"SBR", 1, 50, 8, 9 + cn},
	KindPMR: {"PMR", 1, 60, 2, 6 + 3*cn},
	KindPGR: {"PGR", 1, 62, 2, 65535},
	KindRDR: {"RDR", 1, 70, 2, 65535},
	KindSDR: {"SDR", 1, 80, 3, 3 + 255 + 16*cn},
	KindWIR: {"WIR", 2, 10, 1, 6 + cn},
	KindWRR: {"WRR", 2, 20, 10, 26 + 6*cn},
	KindWCR: {"WCR", 2, 30, 0, 20},
	KindPIR: {"PIR", 5, 10, 2, 2},
	KindPRR: {"PRR", 5, 20, 7, 17 + 3*cn},
	KindTSR: {"TSR", 10, 30, 7, 40 + 3*cn},
	KindPTR: {"PTR", 15, 10, 7, 31 + 6*cn},
	KindMPR: {"MPR", 15, 15, 7, 65535},
	KindFTR: {"FTR", 15, 20, 7, 65535},
	KindBPS: {"BPS", 20, 10, 0, cn},
	KindEPS: {"EPS", 20, 20, 0, 0},
	KindGDR: {"GDR", 50, 10, 2, 65535},
	KindDTR: {"DTR", 50, 30, 1, cn},
	KindPLR: {"PLR", 1, 63, 2, 65535},
	KindVUR: {"VUR", 0, 30, 1, cn},
	KindPSR: {"PSR", 1, 90, 1, 65535},
	KindNMR: {"NMR", 1, 91, 1, 65535},
	KindCNR: {"CNR", 1, 92, 1, 65535},
	KindSSR: {"SSR", 1, 93, 1, 65535},
	KindCDR: {"CDR", 1, 94, 1, 65535},
	KindSTR: {"STR", 15, 30, 1, 65535},
}

// code is REC_TYP and REC_SUB as they stand in the file, read as one
// little-endian number: both are single bytes, so the byte order of the file
// does not matter.
type code uint16

func codeOf(typ, sub uint8) code { return code(typ) | code(sub)<<8 }

func (c code) typ() uint8 { return uint8(c) }
func (c code) sub() uint8 { return uint8(c >> 8) }

// kindOf maps every code to its kind: a table, as each byte of a damaged
// stretch is looked up in it.
var kindOf = func() *[1 << 16]Kind {
	var t [1 << 16]Kind
	for k := KindFAR; k < kinds; k++ {
		t[codeOf(forms[k].typ, forms[k].sub)] = k
	}
	return &t
}()

// String gives the three-letter name, such as "PTR".
func (k Kind) String() string {
	if k >= kinds {
		return forms[Unknown].name
	}
	return forms[k].name
}

// Code gives REC_TYP and REC_SUB.
func (k Kind) Code() (typ, sub uint8) {
	if k >= kinds {
		return 0, 0
	}
	return forms[k].typ, forms[k].sub
}

// header is a record header: REC_LEN, and the code with the kind it means.
type header struct {
	size int
	code code
	kind Kind
}

// parseHeader reads the first four bytes of b, which must be there.
func parseHeader(b []byte, big bool) header {
	h := binary.LittleEndian.Uint32(b)
	size := int(h & 0xffff)
	if big {
		size = size>>8 | size&0xff<<8
	}
	c := code(h >> 16)
	return header{size, c, kindOf[c]}
}

// strict says whether the header is one that a V4 writer could have written.
func (h header) strict() bool {
	f := &forms[h.kind]
	return h.kind != Unknown && h.size >= f.min && h.size <= f.max
}
