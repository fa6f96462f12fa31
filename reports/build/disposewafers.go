package build

import (
	"fmt"
	"slices"
	"strings"

	"kneepoint/reports"
	"kneepoint/reports/causes"
)

// wafers finds each wafer's proposal.
func (d *dispose) wafers(whole bool) {
	for i := range d.r.Wafers {
		d.list = append(d.list, d.wafer(i, whole))
	}
}

func (d *dispose) wafer(i int, whole bool) reports.WaferDisposition {
	x := &d.r.Wafers[i]
	out := reports.WaferDisposition{ID: x.ID, Proposal: d.proposal}
	if d.proposal == cannotSay {
		out.Because = []string{"as the lot"}
		return out
	}
	own := d.touching(i)
	if why := d.ruined(i, own); why != "" {
		out.Proposal, out.Because = scrap, []string{why}
		return out
	}
	if whole {
		out.Because = []string{"as the lot"}
		return out
	}
	out.Proposal, out.Because = d.byCauses(i, own)
	if d.w.in.Settings.Retest == retestBest && (out.Proposal == release || out.Proposal == afterScreen) {
		out.Proposal = hold
		out.Because = append([]string{"the best of several measurements counted"}, out.Because...)
	}
	return out
}

// touching are the probable causes that a wafer is affected by or that cost it dice.
func (d *dispose) touching(i int) []*causes.Account {
	var out []*causes.Account
	x := &d.r.Wafers[i]
	for _, a := range d.likely {
		if a.Cause == causes.Nothing {
			continue
		}
		costs := i < len(a.Lost) && a.Lost[i] >= 3 && a.Lost[i] >= lossOnWafer*float64(x.Dice)
		if slices.Contains(a.Wafers, x.ID) || costs {
			out = append(out, a)
		}
	}
	return out
}

// ruined is why a wafer is a scrap candidate, "" when it is not.
func (d *dispose) ruined(i int, own []*causes.Account) string {
	x := &d.r.Wafers[i]
	if x.Dice == 0 || !(float64(x.Yield.Estimate) < scrapBelow) {
		return ""
	}
	var names []string
	for _, a := range own {
		if setupCauses[a.Cause] {
			return ""
		}
		names = append(names, causeWords(a.Cause, a.Direction))
	}
	if len(names) == 0 {
		return "" // not known by what: hold it
	}
	return fmt.Sprintf("%d of %d dice are good, by %s, which no retest heals", x.Passing, x.Dice, strings.Join(names, " and "))
}

// byCauses goes by the causes that touch a wafer.
func (d *dispose) byCauses(i int, own []*causes.Account) (proposal string, because []string) {
	x := &d.r.Wafers[i]
	limit := yieldLimit(float64(d.r.Yield.Baseline), x.Dice, 2*nearBaseline)
	low := ""
	if float64(x.Yield.Estimate) < limit {
		low = fmt.Sprintf("yields %s, below the limit of %s for a wafer", percentWords(x.Yield.Estimate), percentWords(num(limit)))
	}
	if len(own) == 0 {
		if a := d.claimant(i); a != nil {
			return d.byClaim(i, a, low)
		}
	}
	rank := map[string]int{release: 0, afterScreen: 1, retest: 2, hold: 3}
	proposal = release
	for _, a := range own {
		p := hold
		text := causeWords(a.Cause, a.Direction)
		if n := a.Lost[i]; n >= 1 {
			text += fmt.Sprintf(" cost about %.0f of %d dice", n, x.Dice)
		}
		switch {
		case setupCauses[a.Cause]:
			p = retest
		case localCauses[a.Cause]:
			p = afterScreen
		}
		because = append(because, text)
		if rank[p] > rank[proposal] {
			proposal = p
		}
	}
	switch {
	case len(own) == 0 && low != "":
		return hold, []string{low, "no probable cause explains it"}
	case len(own) == 0 && !d.r.Yield.Baseline.Valid():
		return hold, []string{"no probable cause touches it, but no baseline says what a healthy wafer yields"}
	case len(own) == 0:
		return release, []string{fmt.Sprintf("yields %s; no probable cause touches it", percentWords(x.Yield.Estimate))}
	case low != "":
		because = append(because, low)
	}
	return proposal, because
}

// claimant is the cause that claims most of a wafer's dice, whatever its probability
// for the lot, when those are more than chance and healthy lots make: one wafer of
// many is little evidence for the lot, and enough for the wafer. nil without.
func (d *dispose) claimant(i int) *causes.Account {
	x := &d.r.Wafers[i]
	var most *causes.Account
	for k := range d.w.verdict {
		a := &d.w.verdict[k]
		if a.Cause != causes.Unknown && i < len(a.Lost) && a.Lost[i] >= lossOnWafer*float64(x.Dice) &&
			slices.Contains(a.Wafers, x.ID) && (most == nil || a.Lost[i] > most.Lost[i]) {
			most = a
		}
	}
	return most
}

// byClaim goes by a cause that is probable for the wafer alone.
func (d *dispose) byClaim(i int, a *causes.Account, low string) (proposal string, because []string) {
	x := &d.r.Wafers[i]
	because = []string{fmt.Sprintf("about %.0f of %d dice fail as %s makes them, though it is not probable for the lot", a.Lost[i], x.Dice, causeWords(a.Cause, a.Direction))}
	if low != "" {
		because = append(because, low)
	}
	switch {
	case setupCauses[a.Cause]:
		return retest, because
	case localCauses[a.Cause]:
		return afterScreen, because
	}
	return hold, because
}
