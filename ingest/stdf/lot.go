package stdf

// currentRun is the run that parts belong to now; made up where the file has
// none.
func (p *Parts) currentRun() *Run {
	if len(p.runs) == 0 {
		p.r.damages.add(p.r.at, DamageNoMIR, 0, "there is no MIR before this record: lot and program are not known")
		p.runs = append(p.runs, newRun(0, p.r.at))
	}
	return p.runs[len(p.runs)-1]
}

// lot takes in the records that are not of a part.
func (p *Parts) lot(rec Record) {
	switch m := rec.(type) {
	case *MIR:
		p.mir(m)
	case *MRR:
		p.abandonAll("the run ends")
		if run := p.currentRun(); run.MRR == nil {
			run.MRR = Clone(m).(*MRR)
		}
	case *WIR:
		p.wir(m)
	case *WRR:
		p.wrr(m)
	case *WCR:
		p.currentRun().WCR = Clone(m).(*WCR)
	case *SDR:
		if run := p.currentRun(); len(run.SDRs) < maxSDRs {
			run.SDRs = append(run.SDRs, Clone(m).(*SDR))
		}
	case *RDR:
		p.currentRun().RDR = Clone(m).(*RDR)
	case *PMR:
		p.pins[m.Index] = Clone(m).(*PMR)
	case *HBR:
		run := p.currentRun()
		run.claim(run.hard, m)
	case *SBR:
		run := p.currentRun()
		run.claim(run.soft, (*HBR)(m))
	case *PCR:
		run := p.currentRun()
		if m.Head == AllSites {
			run.total = Clone(m).(*PCR)
		} else {
			run.site(m.Head, m.Site).PCR = Clone(m).(*PCR)
		}
	}
}

// mir opens a run. One that follows another with nothing in between replaces
// it: some programs write the MIR again when the set-up is corrected.
func (p *Parts) mir(m *MIR) {
	p.stop()
	if n := len(p.runs); n > 0 {
		last := p.runs[n-1]
		if last.Parts == 0 && len(last.Wafers) == 0 && last.MRR == nil {
			last.MIR, last.HasMIR = Clone(m).(*MIR), true
			return
		}
		if n == maxRuns {
			p.r.damages.add(p.r.at, DamageTooMany, 0, "there are more than %d MIR: the runs from here on are taken as one", maxRuns)
			return
		}
		p.finishRun()
	}
	run := newRun(len(p.runs), p.r.at)
	run.MIR, run.HasMIR = Clone(m).(*MIR), true
	p.runs = append(p.runs, run)
	p.onHead, p.inDoubt = [256]*Wafer{}, [256]bool{}
	clear(p.pins)
}

// finishRun closes the current run, at the next MIR or the end of the file.
func (p *Parts) finishRun() {
	why := "the run ends"
	if p.closed {
		why = "the file ends"
	}
	p.abandonAll(why)
	if len(p.runs) == 0 {
		return
	}
	run := p.runs[len(p.runs)-1]
	for _, i := range run.Wafers {
		if w := p.wafers[i]; w.ID == "" && w.before != nil && w.before.ID != "" {
			w.ID, w.Assumed = w.before.ID, true
			p.r.damages.add(w.Offset, DamageGap, 0, "%s from here on are taken to be of wafer %s, as those before the damaged place; no record says so",
				plural(int(w.Parts), "part"), quote(w.ID))
		}
	}
	run.close()
	end := p.r.at
	if p.closed {
		end = p.r.Position()
	}
	run.check(p.wafers, end, &p.r.damages)
}

// abandonAll gives up all parts that are open.
func (p *Parts) abandonAll(why string) {
	for _, s := range p.open {
		p.abandon(s, why)
	}
}

// wafer is the wafer that parts of a head belong to now; one without WIR where
// none is open. Behind a gap that may have hidden the end of a wafer and the
// start of the next, parts go to a wafer of their own, until a WRR names it.
func (p *Parts) wafer(head uint8) *Wafer {
	w := p.onHead[head]
	switch {
	case w == nil:
		w = p.newWafer(head)
	case p.inDoubt[head]:
		before := w
		if w = p.newWafer(head); w != before {
			w.before = before
		}
	}
	p.inDoubt[head] = false
	return w
}

func (p *Parts) newWafer(head uint8) *Wafer {
	if n := len(p.wafers); n >= maxWafers {
		p.r.damages.add(p.r.at, DamageTooMany, 0, "there are more than %d wafers: those from here on are taken as one", maxWafers)
		p.onHead[head] = p.wafers[n-1]
		return p.wafers[n-1]
	}
	run := p.currentRun()
	w := &Wafer{Index: len(p.wafers), Run: run.Index, Head: head, Offset: p.r.at}
	p.wafers = append(p.wafers, w)
	run.Wafers = append(run.Wafers, w.Index)
	p.onHead[head] = w
	return w
}

// wir opens a wafer on its head.
func (p *Parts) wir(m *WIR) {
	p.inDoubt[m.Head] = false
	full := len(p.wafers) >= maxWafers
	w := p.newWafer(m.Head)
	if full {
		return
	}
	w.WIR = Clone(m).(*WIR)
	w.ID = trim(m.WaferID)
}

// wrr closes the wafer of its head; without a WIR the parts since the last
// wafer are on it.
func (p *Parts) wrr(m *WRR) {
	w := p.onHead[m.Head]
	id := trim(m.WaferID)
	if w == nil || p.inDoubt[m.Head] && id != "" && id != w.ID {
		// With a gap before it: a wafer all of whose parts were lost.
		w = p.newWafer(m.Head)
	}
	if w.WRR == nil {
		w.WRR = Clone(m).(*WRR)
		if w.ID == "" {
			w.ID = id
		}
	}
	p.onHead[m.Head], p.inDoubt[m.Head] = nil, false
}
