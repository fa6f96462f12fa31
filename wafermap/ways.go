package wafermap

// ways lead from a die to its neighbours, by steps. One goroutine may use them at a time.
type ways struct {
	g      *Grid
	steps  []step
	offset []int // in the index' table
	reach  int   // of the longest step along an axis
	found  []int32
}

func (g *Grid) ways(steps []step) *ways {
	w := &ways{g: g, steps: steps, found: make([]int32, len(steps)+1)}
	for _, s := range steps {
		w.offset = append(w.offset, s.dy*g.ix.columns+s.dx)
		w.reach = max(w.reach, s.dx, -s.dx, s.dy, -s.dy)
	}
	return w
}

// from lists the rows of the neighbours of row r, in the order of the steps. The list
// holds until the next call.
func (w *ways) from(r int32) []int32 {
	ix, found, n := w.g.ix, w.found, 0
	column, row := int(w.g.x[r])-ix.x0, int(w.g.y[r])-ix.y0
	if column >= w.reach && column < ix.columns-w.reach && row >= w.reach && row < ix.rows-w.reach {
		at := row*ix.columns + column
		for _, o := range w.offset {
			q := ix.table[at+o]
			found[n] = q
			n += int(^uint32(q) >> 31) // none is -1 and is written over
		}
		return found[:n]
	}
	for _, s := range w.steps {
		if q := w.g.at(r, s); q >= 0 {
			found[n] = int32(q)
			n++
		}
	}
	return found[:n]
}
