package stdf

import (
	"cmp"
	"slices"
)

// Run is what one MIR opens: one lot, or one pass over it. A file holds one, or
// several that were appended to each other. Its records are complete when Parts
// has gone past it.
type Run struct {
	Index  int
	Offset int64  // of the MIR
	MIR    *MIR   // all fields missing when the file has none
	MRR    *MRR   // nil when the run was not closed
	WCR    *WCR   // wafer geometry; nil none
	SDRs   []*SDR // site hardware
	RDR    *RDR   // nil none; else the run retests
	HasMIR bool

	HardBins, SoftBins []Bin // sorted by number, of HBR and SBR and of the parts
	Sites              []Site
	Wafers             []int // indexes in Parts.Wafers

	Parts, Good int64 // PRRs, and those of them that say they passed
	Retested    int64 // PRRs that stand in for an earlier part

	hard, soft map[uint16]*Bin
	metHard    [16]*Bin // of the last parts, by the low bits of their numbers
	metSoft    [16]*Bin
	sites      map[uint16]*Site
	total      *PCR // over all sites
}

// Bin is a hardware or software bin of a run.
type Bin struct {
	Number   uint16
	Name     string
	PassFail byte  // P, F, ' ' unknown
	Claimed  int64 // count of HBR or SBR; -1 none
	Parts    int64 // PRRs counted
	summed   bool  // Claimed is over all sites
}

// Site is a test site of a run.
type Site struct {
	Head, Site  uint8
	Parts, Good int64 // PRRs counted
	Retested    int64 // of them, those that stand in for an earlier part
	PCR         *PCR  // nil none
}

// Wafer is one stretch of parts of a head between WIR and WRR. A wafer that is
// tested again in the same file is a second Wafer with the same ID, and so is
// the rest of one behind a damaged place. Parts outside of any such stretch are on a Wafer that has neither record: the whole
// run of a file of packaged parts is one.
type Wafer struct {
	Index, Run  int
	Head        uint8
	ID          string // WAFER_ID of WIR, else of WRR; without padding
	Offset      int64  // of the WIR, else of the first part
	WIR         *WIR   // nil none
	WRR         *WRR   // nil none
	Parts, Good int64  // PRRs counted
	Retested    int64  // of them, those that stand in for an earlier part

	// Assumed says that the ID is that of the wafer before a damaged place,
	// which may have hidden the start of another one: no record names it.
	Assumed bool
	before  *Wafer // the wafer before the damaged place
}

// Bounds on what a damaged or hostile file can make of lot-level records.
const (
	maxRuns   = 1 << 10
	maxWafers = 1 << 16
	maxSDRs   = 1 << 10
)

func newRun(index int, at int64) *Run {
	return &Run{
		Index: index, Offset: at,
		MIR:  &MIR{Mode: ' ', Retest: ' ', Protection: ' ', BurnIn: 65535, CommandMode: ' '},
		hard: make(map[uint16]*Bin), soft: make(map[uint16]*Bin), sites: make(map[uint16]*Site),
	}
}

func (r *Run) bin(m map[uint16]*Bin, number uint16) *Bin {
	b := m[number]
	if b == nil {
		b = &Bin{Number: number, PassFail: ' ', Claimed: -1}
		m[number] = b
	}
	return b
}

// claim takes an HBR or SBR over: the one over all sites counts, else the sum
// over the sites.
func (r *Run) claim(m map[uint16]*Bin, rec *HBR) {
	b := r.bin(m, rec.Number)
	if b.Name == "" {
		b.Name = trim(rec.Name)
	}
	if b.PassFail == ' ' && (rec.PassFail == 'P' || rec.PassFail == 'F') {
		b.PassFail = rec.PassFail
	}
	switch {
	case rec.Count == NoCount:
	case rec.Head == AllSites:
		b.Claimed, b.summed = int64(rec.Count), true
	case !b.summed:
		b.Claimed = max(b.Claimed, 0) + int64(rec.Count)
	}
}

func (r *Run) site(head, site uint8) *Site {
	key := uint16(head)<<8 | uint16(site)
	s := r.sites[key]
	if s == nil {
		s = &Site{Head: head, Site: site}
		r.sites[key] = s
	}
	return s
}

// count counts a part of a site.
func (r *Run) count(p *Part, s *Site) {
	good, known := p.Flag.Pass()
	r.Parts++
	s.Parts++
	if good && known {
		r.Good++
		s.Good++
	}
	if p.Flag.Retest() {
		r.Retested++
		s.Retested++
	}
	if n := p.HardBin; n != Missing {
		b := r.metHard[n%16]
		if b == nil || int32(b.Number) != n {
			b = r.bin(r.hard, uint16(n))
			r.metHard[n%16] = b
		}
		b.Parts++
	}
	if n := p.SoftBin; n != Missing {
		b := r.metSoft[n%16]
		if b == nil || int32(b.Number) != n {
			b = r.bin(r.soft, uint16(n))
			r.metSoft[n%16] = b
		}
		b.Parts++
	}
}

// close sorts what was gathered.
func (r *Run) close() {
	r.HardBins, r.SoftBins = sortedBins(r.hard), sortedBins(r.soft)
	r.Sites = r.Sites[:0]
	for _, s := range r.sites {
		r.Sites = append(r.Sites, *s)
	}
	slices.SortFunc(r.Sites, func(a, b Site) int { return cmp.Or(cmp.Compare(a.Head, b.Head), cmp.Compare(a.Site, b.Site)) })
}

func sortedBins(m map[uint16]*Bin) []Bin {
	bins := make([]Bin, 0, len(m))
	for _, b := range m {
		bins = append(bins, *b)
	}
	slices.SortFunc(bins, func(a, b Bin) int { return cmp.Compare(a.Number, b.Number) })
	return bins
}

// check compares what the run claims with what was counted. Whether PART_CNT
// counts a part that was tested twice once or twice differs between testers:
// either will do.
func (r *Run) check(wafers []*Wafer, end int64, d *damages) {
	claims := func(at int64, what string, claimed uint32, parts, retested int64) {
		if c := int64(claimed); claimed != NoCount && c != parts && c != parts-retested {
			d.add(at, DamageCounts, 0, "%s counts %d parts, the file holds %d", what, c, parts)
		}
	}
	goodClaims := func(at int64, what string, claimed uint32, good, retested int64) {
		if c := int64(claimed); claimed != NoCount && retested == 0 && c != good {
			d.add(at, DamageCounts, 0, "%s counts %d good parts, the file holds %d", what, c, good)
		}
	}
	for _, i := range r.Wafers {
		if w := wafers[i]; w.WRR != nil {
			what := "the WRR of wafer " + quote(w.ID)
			parts, good, retested := w.Parts, w.Good, w.Retested
			for b := w.before; b != nil && b.ID == w.ID; b = b.before {
				parts, good, retested = parts+b.Parts, good+b.Good, retested+b.Retested
			}
			claims(w.Offset, what, w.WRR.Parts, parts, retested)
			goodClaims(w.Offset, what, w.WRR.Good, good, retested)
		}
	}
	for _, s := range r.Sites {
		if s.PCR != nil {
			what := "the PCR of head " + itoa(int(s.Head)) + ", site " + itoa(int(s.Site))
			claims(end, what, s.PCR.Parts, s.Parts, s.Retested)
			goodClaims(end, what, s.PCR.Good, s.Good, s.Retested)
		}
	}
	if r.total != nil {
		claims(end, "the PCR over all sites", r.total.Parts, r.Parts, r.Retested)
		goodClaims(end, "the PCR over all sites", r.total.Good, r.Good, r.Retested)
	}
	if r.MRR == nil {
		d.add(end, DamageNoMRR, 0, "the run of lot %s has no MRR: it was not closed, or the file was cut", quote(trim(r.MIR.LotID)))
	}
}
