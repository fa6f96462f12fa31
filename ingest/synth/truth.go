package synth

// Truth is what a lot really lost to what: the answer sheet. As JSON it is a
// made-up lot's truth file.
type Truth struct {
	Lot     string `json:"lot"`
	Physics string `json:"physics,omitempty"` // of [Made]
	Seed    uint64 `json:"seed"`
	Dice    int    `json:"dice"`

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

	// Of [MadeCause], for causes that were drawn.
	Variety string  `json:"variety,omitempty"`
	Size    float64 `json:"size,omitempty"`
	Note    string  `json:"note,omitempty"`

	// Wafers it acts on, and for each the passing dice without it less those with it.
	Wafers []string `json:"wafers"`
	Lost   []int    `json:"lost"`
	// Dice it acts on: hit by chance, or shifted by at least a tenth of its full size.
	Dice int `json:"dice"`
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
		ct := newCauseTruth(cause, c)
		lost := 0
		for i := range truth.Wafers {
			if cause.size(seed, c, i) == 0 {
				continue
			}
			n := pass[first+c][i] - pass[0][i]
			ct.Wafers, ct.Lost = append(ct.Wafers, truth.Wafers[i].ID), append(ct.Lost, n)
			lost += n
			ct.Dice += with.hits(c, i)
		}
		ct.Loss = float64(lost) / float64(truth.Dice)
		truth.Shared -= ct.Loss
		truth.Causes = append(truth.Causes, ct)
	}
	return truth
}

func newCauseTruth(c *Cause, number int) CauseTruth {
	return CauseTruth{ID: c.ID, Direction: c.Direction, Text: c.Text, Background: c.Background, Number: number,
		Wafers: []string{}, Lost: []int{}}
}

// hits counts the dice of a wafer that a cause acts on.
func (f *fab) hits(number, wafer int) int {
	d, n := f.newDie(wafer), 0
	for i := range d.causes {
		a := &d.causes[i]
		if a.number != number {
			continue
		}
		for j := range f.dice {
			d.at = &f.dice[j]
			d.key = dieKey(f.seed, wafer, d.at.x, d.at.y)
			if h := d.hit(a); h >= 0.1 {
				n++
			}
		}
	}
	return n
}

// CauseTruth says what one cause of the lot cost, by its number in Spec.Causes. It
// makes the wafers that the cause acts on once more without it.
func (l *Lot) CauseTruth(number int) CauseTruth {
	s := l.Spec
	s.Causes = append([]Cause(nil), s.Causes...)
	s.Causes[number].Off = true
	with, without := newFab(&l.Spec, l.Seed), newFab(&s, l.Seed)
	cause := &l.Spec.Causes[number]
	lost, dice := make([]int, s.Wafers), make([]int, s.Wafers)
	on := func(i int) bool { return cause.size(l.Seed, number, i) != 0 }
	parallel(s.Wafers, func(i int) {
		if on(i) {
			w := without.wafer(i)
			lost[i] = w.passing(&s) - l.Wafers[i].passing(&l.Spec)
			dice[i] = with.hits(number, i)
		}
	})
	ct, sum := newCauseTruth(cause, number), 0
	for i := range l.Wafers {
		if on(i) {
			ct.Wafers, ct.Lost = append(ct.Wafers, l.Wafers[i].ID), append(ct.Lost, lost[i])
			ct.Dice += dice[i]
			sum += lost[i]
		}
	}
	ct.Loss = float64(sum) / float64(l.Dice())
	return ct
}

// Truth is the answer sheet of a drawn lot.
func (m *Made) Truth() Truth {
	t := m.Spec.Truth(m.Seed)
	t.Physics = m.Physics
	for i := range t.Causes {
		for _, c := range m.Causes {
			if c.Number == t.Causes[i].Number {
				t.Causes[i].Variety, t.Causes[i].Size, t.Causes[i].Note = c.Variety, c.Size, c.Note
			}
		}
	}
	return t
}
