package synth

// Truth is what a lot really lost to what: the answer sheet. As JSON it is a
// made-up lot's truth file.
type Truth struct {
	Lot  string `json:"lot"`
	Seed uint64 `json:"seed"`
	Dice int    `json:"dice"`

	// Yield as made, and Clean with every cause off. Clean less Yield is the sum
	// of the causes' losses and of Shared.
	Yield float64 `json:"yield"`
	Clean float64 `json:"clean_yield"`
	// Healthy is the yield with only the background causes on.
	Healthy float64 `json:"healthy_yield"`
	// Shared is lost to two or more causes at once, so that taking away any one
	// of them would not save it. Negative when one cause hides another's loss,
	// as a shift one way hides a shift the other way.
	Shared float64 `json:"shared_loss"`

	Causes []CauseTruth `json:"causes"`
	Wafers []WaferTruth `json:"wafers"`
}

// CauseTruth is what one cause did.
type CauseTruth struct {
	ID         string `json:"cause"`
	Direction  string `json:"direction"`
	Text       string `json:"text"`
	Background bool   `json:"background"`
	Number     int    `json:"number"` // in Spec.Causes

	// Wafers it acts on, and for each the passing dice without it less those with it.
	Wafers []string `json:"wafers"`
	Lost   []int    `json:"lost"`
	// Loss is yield without the cause less yield with it, on the same random
	// numbers.
	Loss float64 `json:"loss"`
}

// WaferTruth is what one wafer really got.
type WaferTruth struct {
	ID    string `json:"id"`
	Dice  int    `json:"dice"`
	Pass  int    `json:"pass"`       // as made
	Clean int    `json:"clean_pass"` // with every cause off
	Epi   Epi    `json:"epi"`
}

// Healthy returns the spec with only its background causes on.
func (s Spec) Healthy() Spec {
	return s.without(func(c *Cause) bool { return !c.Background })
}

// without returns the spec with some causes off; the receiver keeps its own.
func (s Spec) without(off func(*Cause) bool) Spec {
	causes := make([]Cause, len(s.Causes))
	for i, c := range s.Causes {
		c.Off = c.Off || off(&c)
		causes[i] = c
	}
	s.Causes = causes
	return s
}

// Truth makes the lot again without each cause in turn and says what each one
// cost. It takes about as long as Generate for every cause that acts on all
// wafers.
func (s Spec) Truth(seed uint64) Truth {
	with := newFab(&s, seed)
	clean := s.without(func(*Cause) bool { return true })
	healthy := s.Healthy()
	variants := []*fab{with, newFab(&clean, seed), newFab(&healthy, seed)}
	first := len(variants)
	for i := range s.Causes {
		v := s
		v.Causes = append([]Cause(nil), s.Causes...)
		v.Causes[i].Off = true
		variants = append(variants, newFab(&v, seed))
	}
	// pass[variant][wafer]; a wafer the cause does not act on is as made.
	pass := make([][]int, len(variants))
	for v := range pass {
		pass[v] = make([]int, s.Wafers)
	}
	truth := Truth{Lot: s.Lot, Seed: seed, Causes: []CauseTruth{}, Wafers: make([]WaferTruth, s.Wafers)}
	parallel(s.Wafers, func(i int) {
		for v, f := range variants {
			if v >= first && s.Causes[v-first].size(seed, v-first, i) == 0 {
				pass[v][i] = pass[0][i]
				continue
			}
			w := f.wafer(i)
			pass[v][i] = w.passing(f.spec)
			if v == 0 {
				truth.Wafers[i] = WaferTruth{ID: w.ID, Dice: w.Dice, Pass: pass[0][i], Epi: w.Epi}
			}
		}
		truth.Wafers[i].Clean = pass[1][i]
	})
	for i := range truth.Wafers {
		truth.Dice += truth.Wafers[i].Dice
	}
	share := func(v int) float64 {
		n := 0
		for _, p := range pass[v] {
			n += p
		}
		return float64(n) / float64(truth.Dice)
	}
	truth.Yield, truth.Clean, truth.Healthy = share(0), share(1), share(2)
	truth.Shared = truth.Clean - truth.Yield
	for c := range s.Causes {
		cause := &s.Causes[c]
		if cause.Off {
			continue
		}
		ct := CauseTruth{ID: cause.ID, Direction: cause.Direction, Text: cause.Text, Background: cause.Background, Number: c,
			Wafers: []string{}, Lost: []int{}}
		lost := 0
		for i := range truth.Wafers {
			if cause.size(seed, c, i) == 0 {
				continue
			}
			n := pass[first+c][i] - pass[0][i]
			ct.Wafers, ct.Lost = append(ct.Wafers, truth.Wafers[i].ID), append(ct.Lost, n)
			lost += n
		}
		ct.Loss = float64(lost) / float64(truth.Dice)
		truth.Shared -= ct.Loss
		truth.Causes = append(truth.Causes, ct)
	}
	return truth
}
