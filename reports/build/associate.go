package build

import (
	"math"
	"sort"
	"strconv"

	"kneepoint/ingest"
	"kneepoint/reports"
	"kneepoint/stats/assoc"
)

// associate looks what yield and tests go with: the order of the wafers, the site,
// the order of test, and every attribute of wafers and dice. Only what stands after
// the adjustment for all looks is reported, strongest first.
func (w *lotwork) associate() {
	factors := w.factors()
	if len(factors) == 0 {
		return
	}
	findings := assoc.Scan(w.responses(), factors, assoc.Units{Wafer: w.code})
	for _, f := range findings {
		if !f.Dependent() {
			continue
		}
		unit := ""
		if t := w.lot.TestIndex(f.Of); t >= 0 {
			unit = w.lot.Tests()[t].Unit.Text
		}
		w.rep.Associations = append(w.rep.Associations, reports.Association{Of: f.Of, With: f.With, Cases: f.Cases, N: f.N, Effect: interval(f.Effect), Unit: unit,
			Strength: num(f.Strength), PValue: num(f.P), Adjusted: num(f.Adjusted), Looks: f.Looks, Text: f.Text})
	}
	sort.SliceStable(w.rep.Associations, func(a, b int) bool {
		return w.rep.Associations[a].Adjusted < w.rep.Associations[b].Adjusted
	})
}

// responses are the yield and every test, in the units that are shown.
func (w *lotwork) responses() []assoc.Response {
	passing := make([]float64, w.lot.Len())
	for i, p := range w.pass {
		if p {
			passing[i] = 1
		}
	}
	var out []assoc.Response
	if w.unjudged == "" {
		out = append(out, assoc.Response{Name: "yield", Values: passing, Yield: true})
	}
	for t, test := range w.lot.Tests() {
		out = append(out, assoc.Response{Name: test.Name, Values: inUnit(w.lot.Values(t), test.Unit), Unit: test.Unit.Text})
	}
	return out
}

// factors are what responses may go with. A column with one value explains
// nothing and is left out.
func (w *lotwork) factors() []assoc.Factor {
	var out []assoc.Factor
	n := w.lot.Len()
	wafers := w.lot.Wafers()
	if len(wafers) > 1 {
		order := make([]float64, n)
		for i, wafer := range wafers {
			for row := wafer.Lo; row < wafer.Hi; row++ {
				order[row] = float64(i + 1)
			}
		}
		out = append(out, assoc.Factor{Name: "wafer order", Values: order})
	}
	if sites := w.lot.Site(); sites != nil {
		out = appendFactor(out, siteFactor(sites))
	}
	if w.lot.HasCoordinates() {
		order := make([]float64, n)
		again := w.lot.FirstPass().Index
		for row, d := range w.lot.Touchdown() {
			order[row] = float64(d)
			if again != nil && again[row] >= 0 {
				order[row] = math.NaN() // read again out of turn, most often because it failed
			}
		}
		out = append(out, assoc.Factor{Name: "order of test", Values: order, Order: true})
	}
	names := map[string]bool{}
	for _, wafer := range wafers {
		for k := range wafer.Attributes {
			names[k] = true
		}
	}
	for _, name := range sortedNames(names) {
		out = appendFactor(out, w.waferFactor(name))
	}
	for i, name := range w.lot.DieAttributes() {
		codes, labels := w.lot.DieAttribute(i)
		const most = 200 // labels beyond which a column names dice rather than groups them
		if len(labels) > 1 && len(labels) <= most {
			out = append(out, assoc.Factor{Name: name, Codes: codes, Labels: labels})
		}
	}
	return out
}

func appendFactor(out []assoc.Factor, f assoc.Factor) []assoc.Factor {
	if len(f.Labels) > 1 || f.Codes == nil && f.Values != nil {
		return append(out, f)
	}
	return out
}

func siteFactor(sites []int32) assoc.Factor {
	seen := map[int32]bool{}
	for _, s := range sites {
		if s != ingest.Missing {
			seen[s] = true
		}
	}
	order := make([]int32, 0, len(seen))
	for s := range seen {
		order = append(order, s)
	}
	sort.Slice(order, func(a, b int) bool { return order[a] < order[b] })
	f := assoc.Factor{Name: "site", Codes: make([]int32, len(sites))}
	code := map[int32]int32{}
	for i, s := range order {
		code[s] = int32(i)
		f.Labels = append(f.Labels, strconv.Itoa(int(s)))
	}
	for row, s := range sites {
		f.Codes[row] = -1
		if c, ok := code[s]; ok {
			f.Codes[row] = c
		}
	}
	return f
}

// waferFactor is an attribute of wafers: numbers when all are and more than a few
// differ (a boat position), else names (a reactor).
func (w *lotwork) waferFactor(name string) assoc.Factor {
	const few = 6
	labels := map[string]bool{}
	numeric := true
	for _, wafer := range w.lot.Wafers() {
		if v := wafer.Attributes[name]; v != "" {
			labels[v] = true
			_, err := strconv.ParseFloat(v, 64)
			numeric = numeric && err == nil
		}
	}
	f := assoc.Factor{Name: name}
	if numeric && len(labels) > few {
		f.Values = make([]float64, w.lot.Len())
	} else {
		f.Labels, f.Codes = sortedNames(labels), make([]int32, w.lot.Len())
	}
	for _, wafer := range w.lot.Wafers() {
		v := wafer.Attributes[name]
		number, code := math.NaN(), int32(-1)
		if f.Values != nil {
			if x, err := strconv.ParseFloat(v, 64); err == nil {
				number = x
			}
		} else if v != "" {
			code = int32(sort.SearchStrings(f.Labels, v))
		}
		for row := wafer.Lo; row < wafer.Hi; row++ {
			if f.Values != nil {
				f.Values[row] = number
			} else {
				f.Codes[row] = code
			}
		}
	}
	return f
}

func sortedNames(set map[string]bool) []string {
	out := make([]string, 0, len(set))
	for s := range set {
		out = append(out, s)
	}
	sort.Strings(out)
	return out
}
