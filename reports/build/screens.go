package build

import (
	"context"
	"math"

	"golang.org/x/sync/errgroup"

	"kneepoint/reports"
	"kneepoint/stats/screen"
)

const (
	// neighbourWork and distanceDice bound the screens that look at each die's
	// surroundings and at all tests together: beyond them a report would take
	// minutes, and says so.
	neighbourWork = 4_000_000 // dice times tests
	distanceDice  = 300_000
	// distanceShare is the share of a normal majority within the robust distance.
	distanceShare = 0.999999
)

// screens tries the usual screens and says what each would cost in yield.
func (w *lotwork) screens(ctx context.Context) error {
	if w.unjudged != "" {
		return nil
	}
	tests := w.lot.Tests()
	limits := make([]screen.Limits, len(tests))
	reasons := make([]string, len(tests))
	outside := make([]screen.Screen, len(tests))
	near := make([][]bool, len(tests))
	columns := make([][]float64, len(tests))
	neighbours := w.lot.HasCoordinates() && w.lot.Len()*len(tests) <= neighbourWork
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(w.workers())
	for t, test := range tests {
		group.Go(func() error {
			if ctx.Err() != nil {
				return ctx.Err()
			}
			x, marks := inUnit(w.lot.Values(t), test.Unit), w.lot.Censor(t)
			good := w.passingOnly(x)
			o, why := screen.Standard().Fitting(good, marks)
			limits[t], reasons[t] = screen.PartAverage(good, marks, o), why
			outside[t] = screen.Screen{Name: "part average limits", Flag: limits[t].Outside(x, marks)}
			if neighbours {
				near[t] = w.nearFlags(x, marks)
			}
			columns[t] = symmetric(good, o.Scale == screen.Log)
			return nil
		})
	}
	if err := group.Wait(); err != nil {
		return err
	}
	all := screen.Screen{Name: "part average limits, any test", Flag: make([]bool, w.lot.Len())}
	for t, test := range tests {
		cost := screen.CostOf(outside[t], w.pass, confidence)
		r := w.screenRow(cost, reasons[t])
		r.Test, r.Unit, r.LowerLimit, r.UpperLimit = test.Name, test.Unit.Text, num(limits[t].Lower), num(limits[t].Upper)
		if r.Why = limits[t].Why; r.Why != "" {
			r.Loss, r.LossLower, r.LossUpper = reports.NaN, reports.NaN, reports.NaN
		}
		w.rep.Screens = append(w.rep.Screens, r)
		merge(all.Flag, outside[t].Flag)
	}
	w.lotScreens(all, near, columns)
	return nil
}

// lotScreens are the screens over all tests, and all screens together.
func (w *lotwork) lotScreens(average screen.Screen, near [][]bool, columns [][]float64) {
	list := []screen.Screen{average}
	texts := []string{"robust mean and six robust sigmas of each test's passing dice (AEC-Q001)"}
	skip := func(name, why string) {
		w.rep.Screens = append(w.rep.Screens, reports.Screen{Name: name, Loss: reports.NaN, LossLower: reports.NaN, LossUpper: reports.NaN, LowerLimit: reports.NaN, UpperLimit: reports.NaN, Why: why})
	}
	if len(near) > 0 && near[0] != nil {
		s := screen.Screen{Name: "neighbour residual, any test", Flag: make([]bool, w.lot.Len())}
		for _, f := range near {
			merge(s.Flag, f)
		}
		list = append(list, s)
		texts = append(texts, "readings six robust sigmas off the median of the 24 dice around")
	} else {
		skip("neighbour residual, any test", "needs die coordinates, and no more than 4 million readings")
	}
	if w.lot.HasCoordinates() {
		list = append(list, screen.Screen{Name: "good die among failing ones", Flag: w.badNeighbourhoods()})
		texts = append(texts, "at least half of the eight dice around fail")
	}
	if w.lot.Len() <= distanceDice && len(columns) > 1 {
		d := screen.RobustDistance(columns)
		if d.Why == "" {
			list = append(list, screen.Screen{Name: "robust distance in all tests", Flag: d.Flag(distanceShare)})
			texts = append(texts, "unusual together: beyond the distance within which 99.9999 % of a normal majority lie (minimum covariance determinant)")
		} else {
			skip("robust distance in all tests", d.Why)
		}
	} else {
		skip("robust distance in all tests", "needs two tests or more, and no more than 300,000 dice")
	}
	texts = append(texts, "each die counted once")
	for i, c := range screen.Costs(list, w.pass, confidence) {
		w.rep.Screens = append(w.rep.Screens, w.screenRow(c, texts[i]))
	}
}

func (w *lotwork) screenRow(c screen.Cost, text string) reports.Screen {
	// The share is of passing dice; yield is of all.
	of := float64(c.Good) / math.Max(float64(w.lot.Len()), 1)
	return reports.Screen{Name: c.Name, Dice: c.Screened, Extra: c.Extra, Loss: num(c.Share.Estimate * of), LossLower: num(c.Share.Lower * of), LossUpper: num(c.Share.Upper * of),
		LowerLimit: reports.NaN, UpperLimit: reports.NaN, Text: text}
}

// passingOnly returns the readings of passing dice, others NaN.
func (w *lotwork) passingOnly(x []float64) []float64 {
	good := make([]float64, len(x))
	for i, v := range x {
		good[i] = v
		if !w.pass[i] {
			good[i] = math.NaN()
		}
	}
	return good
}

func (w *lotwork) nearFlags(x []float64, marks []int8) []bool {
	flags := make([]bool, 0, len(x))
	for _, r := range w.lot.Wafers() {
		var m []int8
		if marks != nil {
			m = marks[r.Lo:r.Hi]
		}
		flags = append(flags, screen.NeighbourResidual(w.lot.X()[r.Lo:r.Hi], w.lot.Y()[r.Lo:r.Hi], x[r.Lo:r.Hi], m, screen.Nearby()).Flag...)
	}
	return flags
}

func (w *lotwork) badNeighbourhoods() []bool {
	flags := make([]bool, 0, w.lot.Len())
	for _, r := range w.lot.Wafers() {
		fail := make([]bool, r.Hi-r.Lo)
		for i := range fail {
			fail[i] = !w.pass[r.Lo+i]
		}
		flags = append(flags, screen.BadNeighbourhood(w.lot.X()[r.Lo:r.Hi], w.lot.Y()[r.Lo:r.Hi], fail, 1, 3, 0.5).Flag...)
	}
	return flags
}

// symmetric puts readings on the scale on which they are symmetric.
func symmetric(x []float64, log bool) []float64 {
	if !log {
		return x
	}
	out := make([]float64, len(x))
	for i, v := range x {
		out[i] = math.Log(v)
	}
	return out
}

func merge(into, flags []bool) {
	for i, f := range flags {
		into[i] = into[i] || f
	}
}
