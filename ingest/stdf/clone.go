package stdf

import (
	"bytes"
	"fmt"
	"slices"
)

// Clone copies a record, with all that it holds, so that it outlives the next
// Scan. Test is shared with the Reader.
func Clone(rec Record) Record {
	switch m := rec.(type) {
	case *FAR:
		return ptr(*m)
	case *ATR:
		return ptr(*m)
	case *MIR:
		return ptr(*m)
	case *MRR:
		return ptr(*m)
	case *PCR:
		return ptr(*m)
	case *HBR:
		return ptr(*m)
	case *SBR:
		return ptr(*m)
	case *PMR:
		return ptr(*m)
	case *PGR:
		c := *m
		c.Pins = slices.Clone(m.Pins)
		return &c
	case *RDR:
		return &RDR{Bins: slices.Clone(m.Bins)}
	case *SDR:
		c := *m
		c.Sites = bytes.Clone(m.Sites)
		return &c
	case *WIR:
		return ptr(*m)
	case *WRR:
		return ptr(*m)
	case *WCR:
		return ptr(*m)
	case *PIR:
		return ptr(*m)
	case *PRR:
		c := *m
		c.PartID, c.PartText, c.Fix = bytes.Clone(m.PartID), bytes.Clone(m.PartText), bytes.Clone(m.Fix)
		return &c
	case *TSR:
		return ptr(*m)
	case *PTR:
		c := *m
		c.textRaw, c.alarmRaw, c.optRaw = nil, nil, nil
		c.about = m.about.clone()
		if m.Optional != nil {
			c.Optional = ptr(*m.Optional)
		}
		return &c
	case *MPR:
		c := *m
		c.textRaw = nil
		c.about = m.about.clone()
		c.States = Nibbles{m.States.N, bytes.Clone(m.States.Data)}
		c.Results = slices.Clone(m.Results)
		if m.Optional != nil {
			c.Optional = ptr(*m.Optional)
			c.Optional.Pins = slices.Clone(m.Optional.Pins)
		}
		return &c
	case *FTR:
		c := *m
		c.textRaw = nil
		c.ReturnPins, c.ProgramPins = slices.Clone(m.ReturnPins), slices.Clone(m.ProgramPins)
		c.ReturnStates = Nibbles{m.ReturnStates.N, bytes.Clone(m.ReturnStates.Data)}
		c.ProgramStates = Nibbles{m.ProgramStates.N, bytes.Clone(m.ProgramStates.Data)}
		c.FailPins = Bits{m.FailPins.N, bytes.Clone(m.FailPins.Data)}
		c.SpinMap = Bits{m.SpinMap.N, bytes.Clone(m.SpinMap.Data)}
		return &c
	case *BPS:
		return ptr(*m)
	case *EPS:
		return ptr(*m)
	case *GDR:
		c := *m
		c.fields, c.data = slices.Clone(m.fields), bytes.Clone(m.data)
		return &c
	case *DTR:
		return ptr(*m)
	}
	panic(fmt.Sprintf("stdf: Clone of a %T", rec))
}

func ptr[T any](v T) *T { return &v }

func (a about) clone() about {
	if a.limits != nil {
		a.limits = ptr(*a.limits)
	}
	return a
}
