package causes

import "math"

// Account is all that is told of one cause of a lot.
type Account struct {
	Judged
	Text  string  // of the catalogue
	Prior float64 // probability before any evidence, of it alone

	Dice   Amount    // that would pass without the cause, of the lot
	Lost   []float64 // the same by wafer
	Wafers []string  // affected

	Listed       bool // has reasons
	For, Against []Reason
	Alike        []string // causes that this lot does not tell from it
	Next         []Measurement
}

// Accounts tells of all causes, most probable first. Those with at least a probability,
// and the first few, are Listed with their reasons; of the others there is only what
// they claim of the dice. Nothing has no dice of its own, and what the unknown lost is
// what no listed cause is charged with.
func (v *Verdict) Accounts(least float64, few int) []Account {
	listed := 0
	for listed < len(v.Causes) && (listed < few || v.Causes[listed].Probability >= least) {
		listed++
	}
	dice := v.attribute(v.Causes)
	all := v.measurements(v.Causes[:listed])
	out := make([]Account, len(v.Causes))
	total := v.j.priorTotal()
	for i, g := range v.Causes {
		a := &out[i]
		a.Judged, a.Dice, a.Lost, a.Listed = g, dice[i].total, dice[i].lost, i < listed
		a.Prior = v.j.priorOf(&g) / total
		for w, yes := range dice[i].affected {
			if yes {
				a.Wafers = append(a.Wafers, v.j.e.Wafers[w].ID)
			}
		}
		if g.entry >= 0 {
			a.Text = v.j.k.Causes[g.entry].Text
		}
		if !a.Listed {
			continue
		}
		a.For, a.Against = v.reasons(&g, &dice[i])
		a.Next = nextOf(all, g.Cause, i == 0)
		for _, k := range v.Alike {
			switch {
			case k.Told:
			case g.Cause == k.A:
				a.Alike = append(a.Alike, k.B)
			case g.Cause == k.B:
				a.Alike = append(a.Alike, k.A)
			}
		}
	}
	v.unexplained(out)
	return out
}

// unexplained charges the unknown with the failing dice beyond healthy lots that no
// listed cause is charged with.
func (v *Verdict) unexplained(list []Account) {
	for i := range list {
		if list[i].Cause != Unknown {
			continue
		}
		a := &list[i]
		for w := range a.Lost {
			s := &v.j.e.Wafers[w]
			rest := float64(s.Failing) - v.j.e.healthyLoss()*float64(s.Dice)
			for k := range list {
				if list[k].entry >= 0 && list[k].Listed {
					rest -= list[k].Lost[w]
				}
			}
			a.Lost[w] = rest
		}
		rest := sumOf(a.Lost)
		for w := range a.Lost {
			a.Lost[w] = max(0, a.Lost[w])
		}
		// healthy lots differ in their loss by about a third of it
		sd := math.Hypot(math.Sqrt(max(rest, 1)), 0.3*v.j.e.healthyLoss()*float64(v.j.e.Dice))
		a.Dice = Amount{max(0, rest), max(0, rest-z95*sd), min(float64(v.j.e.Failing), max(0, rest)+z95*sd)}
	}
}

func (j *judged) priorOf(g *Judged) float64 {
	switch g.Cause {
	case Nothing:
		return j.k.WithinBaseline.Odds * float64(len(j.k.Causes))
	case Unknown:
		return j.k.Unexplained.Odds
	}
	return j.k.Causes[g.entry].Odds
}

func (j *judged) priorTotal() float64 {
	sum := j.k.WithinBaseline.Odds*float64(len(j.k.Causes)) + j.k.Unexplained.Odds
	for i := range j.k.Causes {
		sum += j.k.Causes[i].Odds
	}
	return sum
}

// HealthyLoss is the share of dice that healthy lots lose, as taken for this lot.
func (v *Verdict) HealthyLoss() float64 { return v.j.e.healthyLoss() }
