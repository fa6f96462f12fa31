// Package stdf reads and writes STDF V4, the trade's open format for what a
// tester logs: a file of binary records, one after the other, as they happen.
//
// It knows records and parts, and nothing of lots, products or statistics.
// [Reader] gives the records; [Parts] puts them together to tested parts, with
// what belongs to wafer and lot beside them; [Writer] writes records. Damaged
// files are read as far as they can be: what is wrong is a [Damage], with the
// byte where it is, and never a panic or a silent loss.
//
// # Records
//
// Every record starts with a header of four bytes, then comes its body:
//
//	REC_LEN  U*2  bytes of the body
//	REC_TYP  U*1  group: 0 file, 1 lot, 2 wafer, 5 part, 10 test of the program,
//	              15 execution of a test, 20 section of the program, 50 free data
//	REC_SUB  U*1  record within the group
//
// The body is a fixed sequence of fields of these types:
//
//	U*1 U*2 U*4  unsigned integer of 1, 2, 4 bytes     I*1 I*2 I*4  signed
//	R*4 R*8      IEEE 754 number of 4, 8 bytes         C*1          a character
//	C*n          text: a length byte, then as many bytes
//	B*1          eight flags, bit 0 the lowest         B*n          a length byte, then as many bytes
//	D*n          a U*2 count of bits, then the bits, the first in the lowest bit of the first byte
//	N*1          four bits; two to a byte, the first in the low half
//	kxT          an array of k items of type T; k is an earlier field
//	V*n          a code byte for the type, then the datum (GDR only)
//
// A record may end after any field: those left out are missing. Many fields have
// a value that says so too: 65535 for SOFT_BIN, -32768 for coordinates,
// 4294967295 for counts, a blank for single characters, an empty text.
//
// The first record is FAR, and its CPU_TYPE tells the byte order of all numbers:
// 1 big-endian, 2 little-endian, 0 little-endian with VAX floats. REC_TYP and
// REC_SUB are single bytes, so headers look alike in both but for REC_LEN.
//
// # Record types
//
//	FAR  0, 10  byte order and version           PIR  5, 10  a part begins on a site
//	ATR  0, 20  program that changed the file    PRR  5, 20  it ends: bins, coordinates, flags
//	MIR  1, 10  lot, program, temperature        TSR 10, 30  a test summed up
//	MRR  1, 20  end of the run                   PTR 15, 10  parametric result
//	PCR  1, 30  part counts                      MPR 15, 15  parametric results of several pins
//	HBR  1, 40  hardware bin                     FTR 15, 20  functional result
//	SBR  1, 50  software bin                     BPS 20, 10  a section of the program begins
//	PMR  1, 60  pin                              EPS 20, 20  it ends
//	PGR  1, 62  group of pins                    GDR 50, 10  free data
//	RDR  1, 70  bins that are retested           DTR 50, 30  free text
//	SDR  1, 80  site hardware
//	WIR  2, 10  a wafer begins on a head
//	WRR  2, 20  it ends, with counts
//	WCR  2, 30  wafer geometry
//
// A file is FAR, any ATR, MIR, then the rest in the order in which it happened,
// then MRR. The fields of each type are in its layout method, in their order,
// and in its Go struct, with the standard's name for each. PLR (1, 63), the
// types that were added for scan test in 2007, and makers' own types are passed
// over and counted: see [Reader.Skipped].
//
// # Parts and sites
//
// A part is what lies between PIR and PRR of the same HEAD_NUM and SITE_NUM. A
// tester that tests several parts at once writes a PIR for each, then results in
// any order, then the PRRs; only head and site tell whose result it is. Bits 0
// and 1 of PART_FLG say that the part was tested before: which of the two
// results counts is for the reader of the file to decide. A wafer is what lies
// between WIR and WRR of the same head.
//
// # Results, limits and units
//
// RESULT, LO_LIMIT and HI_LIMIT of a PTR are in the base unit that UNITS names
// (A, V); RES_SCAL, LLM_SCAL and HLM_SCAL say by which power of ten to multiply
// for display: a result of 1e-9 with UNITS A and RES_SCAL 9 shows as 1 nA. See
// [DisplayUnit].
//
// Limits, scales, unit and formats need to be in the first PTR of a test number
// only: they are the defaults for all later ones of that number, of every site.
// A later record that has a field overrides it for itself alone. OPT_FLAG says
// which fields do not count: there is no such limit (bits 6, 7), or the default
// holds (bits 0, 4, 5). [PTR.Limits] gives what holds for a record. A result
// whose TEST_FLG or PARM_FLG has one of certain bits set must not be used, see
// [Usable]; such a record can still say that the part passed or failed the test.
// R*4 holds about seven digits: see [Decimal].
//
// # Damage
//
// There are no checksums and no marks to find a record by. What can be checked
// is that headers chain: the length of each record must lead to a header of a
// known type with a length that its type can have, and the fields of a record
// must end where it ends. A record that fails is read with the length that its
// fields and the next chain of headers agree on, or left out up to where four
// headers chain again. Bytes that are damaged inside of a field cannot be told
// from sound ones.
//
// Every byte of a file is in a delivered record, a skipped one, or a Damage.
// What is held in memory at a time is a window of at most a megabyte, and the
// tests, wafers and bins met; arrays are made only as far as their record
// reaches.
//
// # Where these facts come from
//
// The V4 specification is an open trade standard, public for decades. It was not
// at hand: record codes, layouts, flag bits, the meaning of missing values and
// the rules on defaults are all written down here from memory. They are held by
// examples put together by hand for each record type in both byte orders
// (bytes_test.go), which guard against slips in the code, but not against an
// error of memory that both share. Least sure are: whether FLD_CNT of a GDR
// counts pad fields (both are read), codes of the types added in 2007 (only
// passed over), and the kinds of VAX floats behind CPU_TYPE 0. That testers
// differ in whether PART_CNT counts retests, and that some write prefixed units,
// pad texts, repeat the MIR, or mark an absent limit by an infinite one, is
// common practice, no source.
package stdf
