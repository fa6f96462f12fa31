package build

import (
	"cmp"
	"math"
	"slices"

	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/wafermap"
)

// What a wafer's map statistics are bounded by.
const (
	clustersShown   = 10   // fail clusters of a wafer that a report lists
	regionsShown    = 5    // regions of hot spots
	smallestCluster = 3    // touching fails that are called a cluster
	fewAlike        = 20   // fails, or passes, below which the normal law of Moran's I is not used
	hotLevel        = 0.05 // false discovery rate of hot spots
	scanMost        = 200_000
	scanFine        = 20_000 // dice up to which a significant circle is compared with 199 random wafers, else with 99
)

// mapwork is what the map steps of one report share.
type mapwork struct {
	order []int32                // touchdowns, see firstOrder
	found [][]wafermap.Signature // by wafer

	places  *places
	all     *stack     // of the lot; nil with fewer than two wafers
	stacks  []*stack   // in the order of Report.Stacks
	typical []*typical // by test; nil where there is none
	shown   []int      // tests whose typical wafer is drawn
}

// prepareMaps makes room for what the wafers' accounts find.
func (w *lotwork) prepareMaps() {
	w.maps.found = make([][]wafermap.Signature, len(w.lot.Wafers()))
	if w.lot.HasCoordinates() {
		w.maps.order = w.firstOrder()
	}
}

// mapWhy says why there are no maps, "" when there are.
func (w *lotwork) mapWhy() string {
	switch {
	case w.unjudged != "":
		return w.unjudged
	case !w.lot.HasCoordinates():
		return "the data have no die coordinates"
	}
	return ""
}

// spatial asks whether the fails of wafer i lie together, and where.
func (w *lotwork) spatial(i int, r *reports.Wafer) {
	s := &r.Spatial
	if s.Why = w.mapWhy(); s.Why != "" {
		return
	}
	wafer := w.lot.Wafers()[i]
	lo, hi := wafer.Lo, wafer.Hi
	grid := wafermap.NewGrid(w.lot.X()[lo:hi], w.lot.Y()[lo:hi])
	fail := w.fails(lo, hi)
	jc := grid.JoinCount(fail, wafermap.Queen)
	s.Why = jc.Why
	s.JoinCount = &reports.JoinCount{Neighbours: "queen", FailFail: num(jc.FailFail), Expected: num(jc.ExpectedFF),
		Variance: num(jc.VarianceFF), Z: num(jc.ZFF), PValue: num(jc.PFF), Method: jc.Method}
	s.Alike = failsAlike(grid, fail)
	clusters := grid.Clusters(fail, wafermap.Queen, smallestCluster)
	s.Total = len(clusters)
	s.Clusters = w.clusters(clusters[:min(len(clusters), clustersShown)])
	s.HotSpots = w.hotSpots(grid, fail)
	s.Scan = w.scan(grid, fail)

	in := wafermap.SignatureInput{Grid: grid, Geometry: w.geo, Fail: fail}
	if site := w.lot.Site(); site != nil {
		in.Site = site[lo:hi]
	}
	if w.maps.order != nil {
		in.Order = w.maps.order[lo:hi]
	}
	if p := w.in.Product; p != nil {
		in.ShotColumns, in.ShotRows = p.Wafer.ShotColumns, p.Wafer.ShotRows
	}
	w.maps.found[i] = wafermap.Signatures(in)
	box := w.geo.Box(w.lot.X()[lo:hi], w.lot.Y()[lo:hi])
	for k := range w.maps.found[i] {
		r.Signatures = append(r.Signatures, w.signature(&w.maps.found[i][k], box))
	}
	w.weighWafer(w.maps.found[i], r.Signatures, ground{w.lot.X()[lo:hi], w.lot.Y()[lo:hi], in.Site, in.Order}, grid, fail)
}

// leastOutside is how many dice must lie outside of all patterns for their fail rate to
// stand for what would be there without.
const leastOutside = 20

// weighWafer gives the patterns of a wafer their losses. What the search gives each is
// what the wafer would win without that one alone: next to nothing where a bowl of
// fails is made up of several. So each has no less than what fails inside its outline
// beyond outside of all, those that overlap sharing, and all together no more than
// the wafer's fails.
func (w *lotwork) weighWafer(found []wafermap.Signature, out []reports.Signature, g ground, grid *wafermap.Grid, fail []bool) {
	if len(out) == 0 || !structured(out[0].Kind) || out[0].Kind == "near-total" {
		return
	}
	s := &stack{tested: make([]int32, len(fail)), failing: make([]int32, len(fail))}
	for _, row := range grid.Rows() {
		s.tested[row] = 1
		if fail[row] {
			s.failing[row] = 1
		}
	}
	members := make([][]bool, len(out))
	for k := range out {
		members[k] = w.members(g, &found[k], &out[k])
	}
	inside := overlaps(len(fail), members)
	outside := 0
	for row, n := range inside {
		if n == 0 {
			outside += int(s.tested[row])
		}
	}
	if outside < leastOutside {
		return
	}
	rate, _, _ := s.rate()
	searched := slices.Clone(out)
	weighStack(s, rate, out, members, inside, true)
	sum := 0.0
	for k := range out {
		if searched[k].Loss > out[k].Loss {
			out[k].Loss, out[k].Background = searched[k].Loss, searched[k].Background
		}
		sum += float64(out[k].Loss)
	}
	for k := range out {
		out[k].Loss *= num(math.Min(1, rate/sum))
		out[k].Strength = num(math.Min(1, float64(out[k].Loss)/rate))
		found[k].Loss = float64(out[k].Loss)
	}
	slices.SortStableFunc(out, func(a, b reports.Signature) int { return cmp.Compare(b.Loss, a.Loss) })
}

func (w *lotwork) fails(lo, hi int) []bool {
	fail := make([]bool, hi-lo)
	for i := range fail {
		fail[i] = !w.pass[lo+i]
	}
	return fail
}

// clusters are groups of dice as the report has them.
func (w *lotwork) clusters(list []wafermap.Cluster) []reports.Cluster {
	var out []reports.Cluster
	for _, c := range list {
		rc := reports.Cluster{Dice: c.Dice, X: num(c.CentreX), Y: num(c.CentreY), RadiusMM: reports.NaN,
			Width: int(c.MaxX-c.MinX) + 1, Height: int(c.MaxY-c.MinY) + 1}
		if w.inMM() {
			dx, dy := (c.CentreX-w.geo.CentreX)*w.geo.DieWidthMM, (c.CentreY-w.geo.CentreY)*w.geo.DieHeightMM
			rc.RadiusMM = num(math.Hypot(dx, dy))
		} else {
			rc.Why = "the die size is not known in millimetres"
		}
		out = append(out, rc)
	}
	return out
}

// failsAlike is the autocorrelation of pass and fail. The normal law that its
// p-values come from needs some of both; the join count does without.
func failsAlike(grid *wafermap.Grid, fail []bool) *reports.Alike {
	value, fails := make([]float64, len(fail)), 0
	for i, f := range fail {
		if f {
			value[i] = 1
			fails++
		}
	}
	out := alike(grid, value)
	if out.Why == "" && min(fails, len(fail)-fails) < fewAlike {
		out.Moran.PValue, out.Geary.PValue = reports.NaN, reports.NaN
		out.Why = "too few fails, or passes, for p-values by the normal law: the join count's is exact or simulated"
	}
	return out
}

// alike is the autocorrelation of a value over one wafer's dice.
func alike(grid *wafermap.Grid, value []float64) *reports.Alike {
	a := grid.Autocorrelation(value, wafermap.Queen, wafermap.Binary)
	moment := func(m wafermap.Moment) reports.Moment {
		return reports.Moment{Value: num(m.Value), Expected: num(m.Expected), Z: num(m.Z), PValue: num(m.P)}
	}
	return &reports.Alike{N: a.N, Moran: moment(a.Moran), Geary: moment(a.Geary), Why: a.Why}
}

// hotSpots are the dice in failing surroundings.
func (w *lotwork) hotSpots(grid *wafermap.Grid, fail []bool) *reports.HotSpots {
	local := grid.FailSpots(fail, wafermap.Queen, hotLevel)
	out := &reports.HotSpots{Level: hotLevel, Why: local.Why}
	hot := make([]bool, len(fail))
	for i, c := range local.Class {
		if c != wafermap.HotSpot {
			continue
		}
		hot[i] = true
		out.Dice++
		if fail[i] {
			out.Fails++
		}
	}
	if out.Dice > 0 {
		regions := grid.Clusters(hot, wafermap.Queen, 1)
		out.Regions = w.clusters(regions[:min(len(regions), regionsShown)])
	}
	return out
}

// scan looks for the circle with the most unlikely fails. Ellipses would take ten
// times as long, and wide ones twice, and tell little more beside the search for
// patterns.
func (w *lotwork) scan(grid *wafermap.Grid, fail []bool) *reports.Scan {
	out := &reports.Scan{X: reports.NaN, Y: reports.NaN, Radius: reports.NaN, Expected: reports.NaN, PValue: reports.NaN, Unit: w.geo.Unit}
	if len(fail) > scanMost {
		out.Why = "wafers of more than 200,000 dice are not scanned: the random wafers would take too long"
		return out
	}
	o := wafermap.ScanOptions{CirclesOnly: true, Simulations: 199, MaxShare: 0.25}
	if len(fail) > scanFine {
		o.Simulations = 99
	}
	s := grid.Scan(w.geo, fail, o)
	out.PValue, out.Simulations, out.Windows, out.Method = num(s.PValue), s.Simulations, s.Windows, s.Method
	switch {
	case s.Why != "":
		out.Why = s.Why
	case len(s.Clusters) == 0:
		out.Why = "no circle has more fails than chance puts into one"
	default:
		c := s.Clusters[0]
		x, y := w.dieAt(wafermap.Point{X: c.CentreX, Y: c.CentreY}, grid)
		out.X, out.Y, out.Radius = num(x), num(y), num(c.SemiMajor)
		out.Dice, out.Fails, out.Expected = c.Dice, c.Fails, num(c.Expected)
	}
	return out
}

// dieAt turns a place on the wafer into die coordinates. Where the geometry is not
// known places are in die widths from the middle of the dice's box.
func (w *lotwork) dieAt(p wafermap.Point, grid *wafermap.Grid) (x, y float64) {
	if w.geo.Unit == "" {
		minX, maxX, minY, maxY := grid.Bounds()
		return (float64(minX)+float64(maxX))/2 + p.X, (float64(minY)+float64(maxY))/2 + p.Y
	}
	return w.onGrid(p)
}

// onGrid turns a place on a wafer of known geometry into die coordinates.
func (w *lotwork) onGrid(p wafermap.Point) (x, y float64) {
	dy := p.Y / w.geo.DieHeightMM
	if w.geo.YDown {
		dy = -dy
	}
	return w.geo.CentreX + p.X/w.geo.DieWidthMM, w.geo.CentreY + dy
}

// placed says whether a die has coordinates.
func placed(x, y int32) bool { return x != ingest.Missing && y != ingest.Missing }
