package stdf

import (
	"fmt"
	"slices"
	"strings"
)

// Damage is one thing that is wrong with a file, and where.
type Damage struct {
	Offset  int64 // of the first byte concerned, in the unpacked stream
	Kind    DamageKind
	Skipped int64  // bytes of no use from Offset on
	Text    string // one sentence, with its numbers
}

// DamageKind is a stable name of a kind of damage.
type DamageKind string

const (
	// Of the record stream.
	DamageCut       DamageKind = "cut-short"      // the file ends inside a record
	DamageSkipped   DamageKind = "skipped-bytes"  // no record could be made of some bytes
	DamageRecord    DamageKind = "odd-record"     // a record's fields do not fit its length
	DamageStart     DamageKind = "odd-start"      // the file attributes record is missing or contradicts itself
	DamagePadding   DamageKind = "padding"        // zero bytes after the last record
	DamageUnpacking DamageKind = "unpacking"      // the gzip or zstd data are damaged or cut
	DamageTests     DamageKind = "too-many-tests" // results of tests beyond the bound are left out

	// Of parts; found by Parts.
	DamageNoPIR   DamageKind = "part-not-opened"   // a PRR without a PIR
	DamageNoPRR   DamageKind = "part-not-closed"   // a PIR without a PRR: the part is left out
	DamageOrphans DamageKind = "results-of-nobody" // results that no PRR claims
	DamageGap     DamageKind = "part-with-gap"     // bytes were skipped inside a part
	DamageNoMIR   DamageKind = "no-mir"            // parts before any MIR
	DamageNoMRR   DamageKind = "no-mrr"            // the run was not closed
	DamageCounts  DamageKind = "counts-disagree"   // parts counted here against PCR, WRR
	DamageTooMany DamageKind = "too-many-records"  // more wafers or runs than are kept apart
)

// keptDamages is how many of a kind are kept; more are counted.
const keptDamages = 100

// DamageCount is how often a kind of damage was met.
type DamageCount struct {
	Kind    DamageKind
	Count   int64
	Skipped int64 // bytes in all
}

// damages are the findings of a file in the order in which they were made.
type damages struct {
	list   []Damage
	counts []DamageCount
}

// add takes a finding in. The text is made only when it is kept.
func (d *damages) add(offset int64, kind DamageKind, skipped int64, format string, args ...any) {
	if d.count(kind, skipped) {
		d.list = append(d.list, Damage{offset, kind, skipped, fmt.Sprintf(format, args...)})
	}
}

// count counts a finding and says whether it is one to be kept.
func (d *damages) count(kind DamageKind, skipped int64) bool {
	i := slices.IndexFunc(d.counts, func(c DamageCount) bool { return c.Kind == kind })
	if i < 0 {
		i = len(d.counts)
		d.counts = append(d.counts, DamageCount{Kind: kind})
	}
	d.counts[i].Count++
	d.counts[i].Skipped += skipped
	return d.counts[i].Count <= keptDamages
}

// sortedCounts are the counts in the order of their names.
func (d *damages) sortedCounts() []DamageCount {
	counts := slices.Clone(d.counts)
	slices.SortFunc(counts, func(a, b DamageCount) int { return strings.Compare(string(a.Kind), string(b.Kind)) })
	return counts
}

// FormatError says that the input is no STDF V4 file, and why.
type FormatError struct {
	Offset int64
	Text   string
	Remedy string
}

func (e *FormatError) Error() string {
	s := fmt.Sprintf("stdf: byte %d: %s", e.Offset, e.Text)
	if e.Remedy != "" {
		s += "; " + e.Remedy
	}
	return s
}

// SkippedType counts the records of one type that Scan passed over: types of
// later editions (with a name), of a maker's own (Name "?"), or damaged.
type SkippedType struct {
	Type, Sub      uint8
	Name           string
	Records, Bytes int64 // bytes with headers
	First          int64 // offset of the first one
}
