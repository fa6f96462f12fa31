package ingest

// Select returns the lot with only the dice that keep marks, one mark a row.
// Wafers without a die left are gone; earlier readings follow their die. The lot
// itself does not change.
func (l *Lot) Select(keep []bool) *Lot {
	if len(keep) != l.Len() {
		panic("ingest: one mark a die is needed")
	}
	rows, place := make([]int32, 0, len(keep)), make([]int32, len(keep))
	for i, k := range keep {
		place[i] = -1
		if k {
			place[i] = int32(len(rows))
			rows = append(rows, int32(i))
		}
	}
	out := *l
	out.wafers = nil
	for _, w := range l.wafers {
		lo := 0
		if n := len(out.wafers); n > 0 {
			lo = out.wafers[n-1].Hi
		}
		hi := lo
		for hi < len(rows) && int(rows[hi]) < w.Hi {
			hi++
		}
		if hi > lo {
			w.Lo, w.Hi = lo, hi
			out.wafers = append(out.wafers, w)
		}
	}
	c := &l.cols
	out.cols = columns{n: len(rows), x: int32Column(take(l.X(), rows)), y: int32Column(take(l.Y(), rows)),
		site: int32Column(take(l.Site(), rows)), touchdown: int32Column(take(l.Touchdown(), rows)),
		hardBin: int32Column(take(l.HardBin(), rows)), softBin: int32Column(take(l.SoftBin(), rows)), pass: int8Column(take(l.Pass(), rows))}
	for t := range l.tests {
		out.cols.values = append(out.cols.values, float64Column(take(l.Values(t), rows)))
		out.cols.censor = append(out.cols.censor, int8Column(take(l.Censor(t), rows)))
	}
	for _, a := range c.attributes {
		out.cols.attributes = append(out.cols.attributes, dieAttribute{a.name, int32Column(take(a.codes.Int32Values(), rows)), a.labels})
	}
	out.given = nil
	for _, m := range l.given {
		out.given = append(out.given, take(m, rows))
	}
	out.selectEarlier(l, rows, place)
	return &out
}

// selectEarlier keeps the earlier readings of the dice that stay; place is the
// new row of each old one, -1 for those that go.
func (l *Lot) selectEarlier(from *Lot, rows, place []int32) {
	var kept []int32
	moved := make([]int32, len(from.earlier.Of))
	l.earlier = Earlier{}
	for i, row := range from.earlier.Of {
		moved[i] = -1
		if place[row] >= 0 {
			moved[i] = int32(len(kept))
			kept = append(kept, int32(i))
			l.earlier.Of = append(l.earlier.Of, place[row])
		}
	}
	e := &from.earlier
	l.after = take(from.after, kept)
	l.earlier.HardBin, l.earlier.SoftBin, l.earlier.Pass = take(e.HardBin, kept), take(e.SoftBin, kept), take(e.Pass, kept)
	for _, v := range e.Values {
		l.earlier.Values = append(l.earlier.Values, take(v, kept))
	}
	l.first.Index = take(from.first.Index, rows)
	for i, k := range l.first.Index {
		if k >= 0 {
			l.first.Index[i] = moved[k]
		}
	}
}

// take gathers rows of a column; nil stays nil.
func take[T any](column []T, rows []int32) []T {
	if column == nil {
		return nil
	}
	out := make([]T, len(rows))
	for i, r := range rows {
		out[i] = column[r]
	}
	return out
}
