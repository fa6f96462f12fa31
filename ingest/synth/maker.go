package synth

import (
	"errors"
	"fmt"
	"math"
	"slices"
	"sync"

	"kneepoint/config"
	"kneepoint/stats/junction"
)

// Maker makes lots of one product at random, for calibration and rehearsal: what
// is known of the product holds, what nobody knows of it is drawn anew for each
// lot. It is safe for concurrent use, and builds its variants of the device model
// once, when a lot first asks for them.
type Maker struct {
	// Assumed says what the product file does not give and a lot cannot do without,
	// in sentences; NoPhysics why lots follow the laws alone, "" when they need not.
	Assumed   []string
	NoPhysics string

	product *config.Product
	spec    Spec // typical, healthy
	levels  []target
	yield   float64 // of a healthy lot; NaN unknown
	tails   float64 // share of healthy dice beyond the limits by their spread alone
	worlds  [physicsVariants]struct {
		once    sync.Once
		physics *Physics
	}
}

// physicsVariants are so many beliefs about silicon that a product's lots share.
const physicsVariants = 6

// RandomOptions say what lot to draw.
type RandomOptions struct {
	Seed   uint64
	Wafers int      // 0: 25
	Dice   int      // a wafer; 0: what the product's die size gives
	Causes []Wanted // none: a healthy lot

	// LossMin and LossMax are the range of each cause's loss, as a share of the
	// lot's dice. Zero: 0.03 and 0.40.
	LossMin, LossMax float64

	StopOnFail  bool
	KeepProcess bool
	Physics     string // "laws", "junction", or "junction" with a variant's number as Made has it; "": drawn
}

// Wanted is a cause to put into a lot. What is not said is drawn.
type Wanted struct {
	ID        string
	Direction string
	Variety   string  // of [Varieties]
	Size      float64 // in the catalogue's terms; 0: adjusted to the loss
	Wafers    []int   // by index from 0; nil: all, some, a run, every other ...
	AllWafers bool
}

// Made is a lot that was drawn: Spec.Generate(Seed) makes it.
type Made struct {
	Spec   Spec
	Seed   uint64
	Causes []MadeCause // in the order of RandomOptions
	// Product is the product file to read the lot with: the maker's, with the die
	// size of the made lot.
	Product *config.Product
	Physics string // "laws", or "junction" and the variant's number
}

// MadeCause is what was drawn for a wanted cause.
type MadeCause struct {
	ID, Direction, Variety string
	Number                 int // in Spec.Causes
	Size                   float64
	// Loss is about what it costs, judged from a few dice; [Lot.CauseTruth] knows.
	Loss float64
	// Reached is false when no believable size costs what was asked; Note says so.
	Reached bool
	Note    string
}

// Generate makes the lot.
func (m *Made) Generate() *Lot { return m.Spec.Generate(m.Seed) }

// NewMaker prepares a product. Where the file gives no device block a usual one is
// assumed for the level of BVceo, where it gives no wafer a usual wafer.
//
// The error names what is missing. pnp products are declined: slopes and device
// model are those of npn transistors.
func NewMaker(p *config.Product) (*Maker, error) {
	m := &Maker{yield: math.NaN()}
	full := *p
	if full.Device == nil {
		d, err := assumedDevice(p)
		if err != nil {
			return nil, err
		}
		full.Device = d
		m.NoPhysics = "the product file has no device block"
		m.Assumed = append(m.Assumed, fmt.Sprintf("no device block: an epi layer of %.2g um and %.2g ohm cm is assumed",
			d.Epi.ThicknessUM.Target, d.Epi.ResistivityOhmCM.Target))
	}
	if !(full.Wafer.DiameterMM > 0) {
		full.Wafer.DiameterMM, full.Wafer.EdgeExclusionMM = 150, 3
		m.Assumed = append(m.Assumed, "no wafer diameter: 150 mm is assumed")
	}
	if !(full.Wafer.DieWidthMM > 0 && full.Wafer.DieHeightMM > 0) {
		full.Wafer.DieWidthMM = pitchFor(full.Wafer.DiameterMM/2-full.Wafer.EdgeExclusionMM, 600)
		full.Wafer.DieHeightMM = full.Wafer.DieWidthMM
		m.Assumed = append(m.Assumed, "no die size: one of 600 dice a wafer is assumed")
	}
	var err error
	if m.spec, err = FromProduct(&full); err != nil {
		return nil, err
	}
	m.product = &full
	m.targets()
	return m, nil
}

// assumedDevice is a usual epi device for the product's BVceo.
func assumedDevice(p *config.Product) (*config.Device, error) {
	for i := range p.Tests {
		if p.Tests[i].Measures != "bvceo" {
			continue
		}
		bv := testOf(p, &p.Tests[i]).Typical
		if unit := p.Tests[i].Unit; unit.Given() {
			bv = unit.ToSI(bv)
		}
		if !(bv > 2 && bv < 500) {
			break
		}
		// Depletion width and BVceo of endless epi at hFE 120 go about as N^-0.92 and
		// N^-0.78 (PHYSICS.md section 3: 9.0 um and 62 V at 1e15, 2.1 um and 17 V at
		// 5e15); epi as thick as nine tenths of that width, doped a tenth lower.
		n := 1e15 * math.Pow(bv/62, -1/0.78) * 0.9
		d := &config.Device{}
		d.Base.JunctionDepthUM.Value = 0.8
		d.Emitter.DepthUM.Value = 0.25
		d.Epi.ThicknessUM.Target = 9*math.Pow(n/1e15, -0.92)*0.9 + 0.8 + 0.05*math.Log(1e19/n)
		d.Epi.UpDiffusionUM.Value = 0.05
		d.Epi.ResistivityOhmCM.Target = 4.48 * math.Pow(n/1e15, -0.95)
		return d, nil
	}
	return nil, fmt.Errorf("%s: made-up lots need a device block, or a test that measures bvceo to assume one", p.File)
}

// physics returns a variant, building it when it is first asked for; nil when the
// device model cannot have the product.
func (m *Maker) physics(n int) *Physics {
	w := &m.worlds[n]
	w.once.Do(func() {
		if m.NoPhysics != "" {
			return
		}
		// A variant that has no solution at this device is left to the laws.
		w.physics, _ = NewPhysics(m.product, n)
	})
	return w.physics
}

// Prepare builds all variants of the device model now, and says why there is none.
func (m *Maker) Prepare() error {
	if m.NoPhysics != "" {
		return errors.New(m.NoPhysics)
	}
	if _, err := NewPhysics(m.product, 0); err != nil {
		if errors.Is(err, junction.ErrPolarity) {
			return junction.ErrPolarity
		}
		return err
	}
	parallel(physicsVariants, func(i int) { m.physics(i) })
	return nil
}

// Random draws a lot. The same maker's product and options give the same lot, on
// any number of cores and whatever was drawn before.
func (m *Maker) Random(o RandomOptions) (*Made, error) {
	if o.Wafers <= 0 {
		o.Wafers = 25
	}
	if o.LossMin <= 0 {
		o.LossMin = 0.03
	}
	if o.LossMax <= 0 {
		o.LossMax = 0.40
	}
	d := newDraws(root(o.Seed).at(branchSpec))
	out := &Made{Seed: o.Seed}
	s := m.spec
	s.Wafers, s.StopOnFail, s.KeepProcess = o.Wafers, o.StopOnFail, o.KeepProcess
	s.Lot = fmt.Sprintf("MADE-UP-%d", o.Seed)
	s.Tests = slices.Clone(s.Tests)
	if o.Dice > 0 {
		s.Grid.DicePerWafer = o.Dice
	}
	s.Grid.SiteColumns = oneOf(d, 1, 1, 2, 4, 4, 8)
	out.Physics = m.drawPhysics(&s, d.under(1), o.Physics)
	m.drawTester(&s, d.under(2))
	m.drawSpread(&s, d.under(3))
	m.drawBackground(&s, d.under(4))
	n, w, h := s.Grid.Dice()
	if n == 0 {
		return nil, fmt.Errorf("%s: no whole die fits on the wafer", m.product.File)
	}
	p := *m.product
	p.Wafer.DieWidthMM, p.Wafer.DieHeightMM = w, h
	out.Product = &p
	z := newSizer(&s, o.Seed, m)
	for i, want := range o.Causes {
		c, made, err := z.draw(d.under(100+uint64(i)), want, o)
		if err != nil {
			return nil, err
		}
		made.Number = len(s.Causes)
		s.Causes = append(s.Causes, c)
		out.Causes = append(out.Causes, made)
	}
	out.Spec = s
	return out, nil
}
