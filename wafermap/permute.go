package wafermap

import (
	"fmt"
	"math/rand/v2"
	"slices"
)

const (
	// normalFrom is the expected number of fail-fail and pass-pass joins from
	// which the normal tail is taken.
	normalFrom = 30

	permutations   = 9999    // random placements at most
	permutationsLo = 999     // and at least, where maps are large
	placementsCost = 4000000 // dice placed in all placements of a test, about
	enough         = 20      // placements as extreme as the data that settle it
)

// judge fills in PFF and its Method.
func (g *Grid) judge(c *JoinCount, fail []bool, n Neighbours) {
	switch {
	case c.Fails <= 3:
		c.PFF, c.Method = g.exactTail(c, n), "exact"
	case c.ExpectedFF < normalFrom || c.ExpectedPP < normalFrom:
		c.PFF, c.Method = g.permutedTail(c, fail, n)
	default:
		c.PFF, c.Method = c.PFFNormal, "normal"
	}
}

// exactTail is the chance of at least the counted fail-fail joins for two or three
// fails, from how many sets of that many dice hold how many joins. Among three
// dice there can be three joins (a triangle), two (two joins that share a die,
// not part of a triangle) or one.
func (g *Grid) exactTail(c *JoinCount, n Neighbours) float64 {
	dice, joins := float64(c.N), float64(c.Joins)
	if c.FailFail == 0 {
		return 1
	}
	if c.Fails == 2 {
		return joins / (dice * (dice - 1) / 2)
	}
	triangles, wedges := g.triangles(n) // a triangle has three wedges
	sets := triangles
	switch c.FailFail {
	case 2:
		sets = wedges - 2*triangles
	case 1: // joins * (dice-2) meets sets with two joins twice and triangles three times
		sets = joins*(dice-2) - wedges + triangles
	}
	return sets / (dice * (dice - 1) * (dice - 2) / 6)
}

// triangles counts the sets of three dice that are all neighbours, and the pairs
// of joins that share a die.
func (g *Grid) triangles(n Neighbours) (triangles, wedges float64) {
	steps := n.all()
	for _, r := range g.order {
		around := 0
		for i, s := range steps {
			if g.at(r, s) < 0 {
				continue
			}
			around++
			for _, t := range steps[:i] {
				if g.at(r, t) >= 0 && n.joined(step{s.dx - t.dx, s.dy - t.dy}) {
					triangles++
				}
			}
		}
		wedges += float64(around*(around-1)) / 2
	}
	return triangles / 3, wedges
}

// joined reports whether a step leads to a neighbour.
func (n Neighbours) joined(s step) bool {
	dx, dy := max(s.dx, -s.dx), max(s.dy, -s.dy)
	if n == Queen {
		return max(dx, dy) == 1
	}
	return dx+dy == 1
}

// permutedTail places the rarer kind at random, again and again.
func (g *Grid) permutedTail(c *JoinCount, fail []bool, n Neighbours) (p float64, method string) {
	passes := c.N - c.Fails
	rare, rareFails := c.Fails, true
	if passes < c.Fails {
		rare, rareFails = passes, false
	}
	draws := min(permutations, max(permutationsLo, placementsCost/rare))
	deck := slices.Clone(g.order)
	chosen := make([]int32, len(fail)) // draw number in which the row was last chosen
	steps, all := n.later(), n.all()
	random := rand.New(rand.NewPCG(0x6b6e6565, uint64(c.N)<<32|uint64(c.Fails)))
	extreme := 0
	for draw := 1; draw <= draws; draw++ {
		for i := 0; i < rare; i++ { // partial Fisher-Yates
			j := i + random.IntN(len(deck)-i)
			deck[i], deck[j] = deck[j], deck[i]
			chosen[deck[i]] = int32(draw)
		}
		inside, touching := 0, 0
		for _, r := range deck[:rare] {
			for _, s := range steps {
				if q := g.at(r, s); q >= 0 && chosen[q] == int32(draw) {
					inside++
				}
			}
			if !rareFails {
				for _, s := range all {
					if g.at(r, s) >= 0 {
						touching++
					}
				}
			}
		}
		ff := inside
		if !rareFails {
			ff = c.Joins - touching + inside
		}
		if float64(ff) >= c.FailFail {
			if extreme++; extreme == enough {
				return float64(extreme) / float64(draw), fmt.Sprintf("permutation, stopped after %d placements", draw)
			}
		}
	}
	return float64(extreme+1) / float64(draws+1), fmt.Sprintf("permutation, %d placements", draws)
}
