package synth

// Lot is a made-up lot as the tester would have filed it.
type Lot struct {
	ID, Product string
	Spec        Spec
	Seed        uint64
	Wafers      []Wafer
}

// Wafer is one wafer in columns. Rows [0, Dice) are the first measurements in
// the order of test, one a die; the rows after are dice measured again.
type Wafer struct {
	ID      string
	History History
	Dice    int

	X, Y      []int32
	Site      []int32
	Touchdown []int32 // from 1; the dice of one touchdown share it
	HardBin   []int32
	SoftBin   []int32
	Values    [][]float64 // [test][row] in the test's unit, NaN where blank

	// RetestOf[i] is the first row of the die of row Dice+i.
	RetestOf []int32

	Epi Epi // what the wafer truly got

	// Process[latent][die] when the spec says KeepProcess.
	Process [][]float64
}

// Epi is the true epi layer, means over a wafer's dice.
type Epi struct {
	ThicknessUM    float64 `json:"thickness_um"`     // as grown
	NetThicknessUM float64 `json:"net_thickness_um"` // less base and up-diffusion
	DopingCM3      float64 `json:"doping_cm3"`
}

// Final returns each die's row that counts: its last measurement.
func (w *Wafer) Final() []int32 {
	rows := make([]int32, w.Dice)
	for i := range rows {
		rows[i] = int32(i)
	}
	for i, of := range w.RetestOf {
		rows[of] = int32(w.Dice + i)
	}
	return rows
}

// passing counts dice whose last measurement got a passing bin.
func (w *Wafer) passing(s *Spec) int {
	n := 0
	for _, row := range w.Final() {
		if s.PassBin(int(w.HardBin[row])) {
			n++
		}
	}
	return n
}

// Dice counts the lot's dice, each once.
func (l *Lot) Dice() int {
	n := 0
	for i := range l.Wafers {
		n += l.Wafers[i].Dice
	}
	return n
}

// Rows counts the lot's measurements: dice and retests.
func (l *Lot) Rows() int {
	n := 0
	for i := range l.Wafers {
		n += len(l.Wafers[i].X)
	}
	return n
}

// Yield is the share of dice whose last measurement got a passing bin.
func (l *Lot) Yield() float64 {
	n := 0
	for i := range l.Wafers {
		n += l.Wafers[i].passing(&l.Spec)
	}
	return float64(n) / float64(l.Dice())
}

// Limits are those that the program prints for a test, NaN for none: the test's
// own, unless a wrong limit was in force for the whole lot.
func (s *Spec) Limits(test int) (lower, upper float64) {
	t := &s.Tests[test]
	lower, upper = t.Lower, t.Upper
	for i := range s.Causes {
		c := &s.Causes[i]
		if c.Off || c.Wafers != nil {
			continue
		}
		for _, f := range c.Faults {
			if f.Test == t.Name {
				lower, upper = wrong(lower, f.WrongLower), wrong(upper, f.WrongUpper)
			}
		}
	}
	return lower, upper
}

// PassBin reports whether a hard bin is a passing one.
func (s *Spec) PassBin(bin int) bool {
	if len(s.Grades) == 0 {
		return bin == 1
	}
	for _, g := range s.Grades {
		if g.Bin == bin {
			return true
		}
	}
	return false
}
