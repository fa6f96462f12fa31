package causes

// likeness is how often a cause makes each class of dice in each pattern, beside
// equal chances; nil when it makes none.
func (j *judged) likeness(e *Entry) [][]float64 {
	chances := j.k.chances(e)
	if chances == nil {
		return nil
	}
	total := totalOf(e.Maps)
	const blur = 0.1
	out := make([][]float64, len(chances))
	for c, p := range chances {
		out[c] = make([]float64, len(patterns))
		for k := range patterns {
			at := 1.0
			if total > 0 {
				at = (1-blur)*e.Maps[patterns[k]]/total*float64(len(patterns)) + blur
			}
			out[c][k] = ((1-blur)*p*float64(len(chances)) + blur*0.2) * at
		}
	}
	return out
}

// cellsOf counts the failing single dice of wafer w by class and pattern, and finds
// the pattern of each of its dice. A die outside of every pattern is one of random.
func (j *judged) cellsOf(w int) (cells []float64, kinds []int8) {
	span := j.e.cols.Wafers[w]
	random := int8(patternIndex("random"))
	byGroup := make([][]int8, len(groups))
	for g := range groups {
		for _, p := range j.e.Wafers[w].Patterns {
			k := patternIndex(p.Kind)
			if p.Group != groups[g].name || k < 0 || p.Kind == "random" || p.Kind == "none" {
				continue
			}
			if byGroup[g] == nil {
				byGroup[g] = make([]int8, span.Hi-span.Lo)
				for i := range byGroup[g] {
					byGroup[g][i] = random
				}
			}
			for _, i := range p.rows {
				if byGroup[g][i] == random { // patterns come by falling cost
					byGroup[g][i] = int8(k)
				}
			}
		}
	}
	cells = make([]float64, len(j.k.Classes)*len(patterns))
	kinds = make([]int8, span.Hi-span.Lo)
	of := make([]int, len(j.k.Classes))
	for c := range of {
		of[c] = j.k.group(int8(c))
	}
	for i := range kinds {
		kinds[i] = random
		c := j.e.class[span.Lo+i]
		if c < 0 || j.e.cols.Pass[span.Lo+i] {
			continue
		}
		if g := of[c]; g >= 0 && byGroup[g] != nil {
			kinds[i] = byGroup[g][i]
		}
		cells[int(c)*len(patterns)+int(kinds[i])]++
	}
	return cells, kinds
}

func patternIndex(kind string) int {
	for k, p := range patterns {
		if p == kind {
			return k
		}
	}
	return -1
}

// usualCells is the share of dice that a healthy lot loses in each cell: as much as
// the typical wafer here, at most what healthy lots lose in such a class and pattern,
// all cells together at most the healthy loss. A lot of few wafers has no typical
// one: there it is what healthy lots lose on average.
func (a *attributor) usualCells() []float64 {
	j := a.v.j
	out := make([]float64, len(j.k.Classes)*len(patterns))
	loss := j.e.healthyLoss()
	caps, maps, total := 0.0, 0.0, 0.0
	for _, k := range j.k.Classes {
		caps += healthyCap[k.Class]
	}
	for _, p := range patterns {
		maps += healthyMaps[p]
	}
	const few, much = 5, 4 // much: times the mean, what one lot may have of a pattern
	for c := range j.k.Classes {
		for p := range patterns {
			cell := c*len(patterns) + p
			of, in := loss*healthyCap[j.k.Classes[c].Class], healthyMaps[patterns[p]]/maps
			if len(a.cells) < few {
				out[cell] = of / caps * in
			} else {
				out[cell] = min(a.typical(cell), of*min(1, much*in))
			}
			total += out[cell]
		}
	}
	if total > loss {
		for cell := range out {
			out[cell] *= loss / total
		}
	}
	return out
}

// typical is the median over wafers of a cell's share of the dice.
func (a *attributor) typical(cell int) float64 {
	rates := make([]float64, 0, len(a.cells))
	for w := range a.cells {
		if n := a.v.j.e.Wafers[w].Dice; n > 0 {
			rates = append(rates, a.cells[w][cell]/float64(n))
		}
	}
	if len(rates) == 0 {
		return 0
	}
	return median(rates)
}
