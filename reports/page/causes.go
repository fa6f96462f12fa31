package page

import (
	"fmt"
	"strings"

	"kneepoint/reports"
)

// why is the section on causes and the proposal.
type why struct {
	By       string // how the probabilities were weighed
	Overview []causeRow
	Cards    []causeCard
	Rest     []causeCard // improbable ones
	Proposal proposal
}

// causeRow is a line of the overview: how probable, what it cost, where.
type causeRow struct {
	Name, Probability, Loss, Wafers string
	Bar                             *bar
}

// causeCard is one physical cause with its evidence.
type causeCard struct {
	Name        string
	Probability string
	Bar         *bar
	Text        string
	Why         string
	Facts       []fact
	For         *table
	Against     *table
	Next        *table
}

// proposal is what to do, with its reasons.
type proposal struct {
	Name    string
	Because []string
	Facts   []fact
	Wafers  *table
}

// improbable causes are folded away.
const improbable = 0.05

func newWhy(r *reports.Report) *why {
	if len(r.Causes) == 0 && r.Disposition.Proposal == "" {
		return nil
	}
	w := &why{By: sentence(r.CausesBy), Proposal: newProposal(r)}
	for i := range r.Causes {
		c := &r.Causes[i]
		w.Overview = append(w.Overview, causeRow{Name: causeName(*c), Probability: chance(c.Probability), Loss: lossWords(c.Loss), Wafers: onWafers(c.Wafers),
			Bar: shareBar(c.Probability, 1)})
		if i == 0 || c.Probability >= improbable {
			w.Cards = append(w.Cards, newCauseCard(c))
		} else {
			w.Rest = append(w.Rest, newCauseCard(c))
		}
	}
	if len(r.Causes) == 1 && !r.Causes[0].Probability.Valid() {
		w.Overview = nil // there is nothing to compare
	}
	return w
}

func lossWords(loss reports.Interval) string {
	if !loss.Estimate.Valid() {
		return ""
	}
	return percent(loss.Estimate) + " (" + percentRange(loss) + ")"
}

func onWafers(ids []string) string {
	if s := waferWords(ids); s == "" || strings.HasSuffix(s, " wafers") {
		return s
	}
	return noun(len(ids), "wafer ", "wafers ") + waferWords(ids)
}

// waferWords names a few wafers and counts many.
func waferWords(ids []string) string {
	const named = 8
	if len(ids) <= named {
		return strings.Join(ids, ", ")
	}
	return plural(len(ids), "wafer", "wafers")
}

func newCauseCard(c *reports.Cause) causeCard {
	card := causeCard{Name: causeName(*c), Probability: chance(c.Probability), Bar: shareBar(c.Probability, 1), Text: sentence(c.Text), Why: sentence(c.Why)}
	add := func(name, value string) { card.Facts = append(card.Facts, fact{name, value}) }
	if c.Loss.Estimate.Valid() {
		add("loss", lossWords(c.Loss)+" of the tested dice, "+plural(c.Dice, "die", "dice"))
	} else if c.Loss.Why != "" {
		add("loss", notAvailable+": "+c.Loss.Why)
	}
	if len(c.Wafers) > 0 {
		add("wafers", strings.Join(c.Wafers, ", "))
	}
	if c.Prior.Valid() {
		add("before", chance(c.Prior)+" before any evidence")
	}
	if len(c.Alike) > 0 {
		add("alike", strings.Join(c.Alike, ", ")+": this lot does not tell them apart")
	}
	card.For, card.Against = evidenceTable("Speaks for it", c.For), evidenceTable("Speaks against it", c.Against)
	if len(c.Next) > 0 {
		t := &table{Caption: "Measure next", Columns: []column{{Name: "Measurement"}, {Name: "Information, bits", Numeric: true, Help: "expected information on which cause it is"}, {Name: "Caution"}}}
		for _, n := range c.Next {
			t.Rows = append(t.Rows, []cell{{Text: n.Text, Class: "wide"}, text(bits(n.InformationBits)), {Text: n.Caution, Class: "wide"}})
		}
		card.Next = t
	}
	return card
}

func bits(v reports.Number) string {
	if v < 0.01 {
		return "< 0.01"
	}
	return significant(float64(v), 2)
}

func evidenceTable(caption string, list []reports.Evidence) *table {
	if len(list) == 0 {
		return nil
	}
	t := &table{Caption: caption, Columns: []column{{Name: "Observation"}, {Name: "Log odds", Numeric: true, Help: "natural logarithm of the odds that it adds"}, {Name: "Wafers"}}}
	for _, e := range list {
		t.Rows = append(t.Rows, []cell{{Text: e.Text, Class: "wide"}, text(score(e.LogOdds)), {Text: waferWords(e.Wafers), Class: "phrase"}})
	}
	return t
}

func newProposal(r *reports.Report) proposal {
	d := r.Disposition
	p := proposal{Name: words(d.Proposal), Because: sentences(d.Because), Wafers: dispositionTable(d)}
	if y := d.YieldIfFixed; y.Estimate.Valid() {
		p.Facts = append(p.Facts, fact{"yield if fixed", percent(y.Estimate) + " (" + percentRange(y) + "), now " + percent(r.Yield.Estimate)})
	} else if y.Why != "" {
		p.Facts = append(p.Facts, fact{"yield if fixed", notAvailable + ": " + y.Why})
	}
	counts := map[string]int{}
	for _, w := range d.Wafers {
		counts[w.Proposal]++
	}
	var parts []string
	for _, name := range []string{"release", "release-after-screen", "retest", "hold", "scrap-candidate", "cannot-say"} {
		if n := counts[name]; n > 0 {
			parts = append(parts, fmt.Sprintf("%s %d", words(name), n))
		}
	}
	if len(parts) > 0 {
		p.Facts = append(p.Facts, fact{"by wafer", strings.Join(parts, ", ")})
	}
	return p
}

// dispositionTable is the proposal wafer by wafer.
func dispositionTable(d reports.Disposition) *table {
	if len(d.Wafers) == 0 {
		return nil
	}
	t := &table{Caption: "Proposal by wafer", Sortable: true, Columns: []column{{Name: "Wafer"}, {Name: "Proposal"}, {Name: "Because", Plain: true}}}
	for _, w := range d.Wafers {
		t.Rows = append(t.Rows, []cell{text(w.ID), text(words(w.Proposal)), {Text: strings.Join(w.Because, "; "), Class: "wide"}})
	}
	return t
}
