package build

import (
	"context"
	"math"

	"golang.org/x/sync/errgroup"

	"kneepoint/reports"
	"kneepoint/stats/variance"
)

// spread splits the spread of every test over wafers, zones of the wafer and dice.
// It is over passing dice with an exact reading: a hard fail tells of a defect and
// not of the process's spread, and would drown it. Zones are the rings of equal
// area, the same places on every wafer, so what all wafers share of them is a
// pattern of its own.
func (w *lotwork) spread(ctx context.Context) error {
	tests := w.lot.Tests()
	rows := make([][]reports.Variance, len(tests))
	levels := w.spreadLevels()
	group, ctx := errgroup.WithContext(ctx)
	group.SetLimit(w.workers())
	for t := range tests {
		group.Go(func() error {
			if ctx.Err() == nil {
				rows[t] = w.testSpread(t, levels)
			}
			return ctx.Err()
		})
	}
	if err := group.Wait(); err != nil {
		return err
	}
	for _, r := range rows {
		w.rep.Variance = append(w.rep.Variance, r...)
	}
	return nil
}

// spreadLevels numbers each die's wafer and, where the wafer's place is known, its
// ring.
func (w *lotwork) spreadLevels() []variance.Level {
	levels := []variance.Level{{Name: "wafer", Code: w.code}}
	if !w.lot.HasCoordinates() || w.geo.Unit == "" {
		return levels
	}
	zone := make([]int32, w.lot.Len())
	x, y := w.lot.X(), w.lot.Y()
	for i := range zone {
		zone[i] = int32(w.geo.Ring(x[i], y[i], w.in.Settings.Rings))
	}
	return append(levels, variance.Level{Name: "zone", Code: zone, Repeats: true})
}

func (w *lotwork) testSpread(t int, levels []variance.Level) []reports.Variance {
	test := w.lot.Tests()[t]
	y := inUnit(w.lot.Values(t), test.Unit)
	marks := w.lot.Censor(t)
	log := w.logScale[t]
	unit := test.Unit.Text
	if log { // a spread of ratios, as the lognormal fit says
		unit = "ln"
	}
	for i := range y {
		if !w.pass[i] || (marks != nil && marks[i] != 0) {
			y[i] = math.NaN()
		} else if log {
			y[i] = math.Log(y[i])
		}
	}
	fit := variance.New(levels, y).REML(confidence)
	if fit.Why != "" {
		none := reports.Interval{Estimate: reports.NaN, Lower: reports.NaN, Upper: reports.NaN, Why: fit.Why}
		return []reports.Variance{{Test: test.Name, Level: "die", Unit: unit, Sigma: none, Share: reports.NaN, ShareLower: reports.NaN, ShareUpper: reports.NaN}}
	}
	var out []reports.Variance
	for i, c := range fit.Components {
		level := c.Level
		if c.Pattern {
			level += ", pattern"
		}
		r := reports.Variance{Test: test.Name, Level: level, Groups: c.Groups, Unit: unit, Sigma: interval(c.Sigma()),
			Share: num(c.Share.Estimate), ShareLower: num(c.Share.Lower), ShareUpper: num(c.Share.Upper)}
		if i == 0 {
			r.Text = fit.Text()
		}
		out = append(out, r)
	}
	return out
}
