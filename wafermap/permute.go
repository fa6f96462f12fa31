package wafermap

import (
	"fmt"
	"math/rand/v2"
)

const (
	permutations   = 9999    // random placements at most
	permutationsLo = 999     // and at least, where maps are large
	placementsCost = 1500000 // dice placed in all placements of a test, about
	enough         = 100     // placements as extreme as the data that settle it: p is then known to a tenth
)

// exactTail is the chance of at least the counted fail-fail joins for two or three
// fails, from how many sets of that many dice hold how many joins. Among three
// dice there can be three joins (a triangle), two (two joins that share a die,
// not part of a triangle) or one.
func (c *JoinCount) exactTail(shapes shapes) float64 {
	dice, joins := float64(c.N), float64(c.Joins)
	if c.FailFail == 0 {
		return 1
	}
	if c.Fails == 2 {
		return joins / (dice * (dice - 1) / 2)
	}
	triangles, wedges := shapes.triangles, shapes.wedges // a triangle has three wedges
	sets := triangles
	switch c.FailFail {
	case 2:
		sets = wedges - 2*triangles
	case 1: // joins * (dice-2) meets sets with two joins twice and triangles three times
		sets = joins*(dice-2) - wedges + triangles
	}
	return sets / (dice * (dice - 1) * (dice - 2) / 6)
}

// permutedTail places the rarer kind at random, again and again.
func (g *Grid) permutedTail(c *JoinCount, n Neighbours) (p float64, method string) {
	rare, rareFails := c.Fails, true
	if passes := c.N - c.Fails; passes < c.Fails {
		rare, rareFails = passes, false
	}
	draws := min(permutations, max(permutationsLo, placementsCost/rare))
	start, near := g.adjacency(n)
	chosen := make([]uint16, c.N) // draw in which the die was last chosen
	random := rand.New(rand.NewPCG(0x6b6e6565, uint64(c.N)<<32|uint64(c.Fails)))
	extreme := 0
	for draw := uint16(1); int(draw) <= draws; draw++ {
		inside, links := 0, 0
		for done := 0; done < rare; {
			die := random.IntN(c.N)
			if chosen[die] == draw {
				continue
			}
			chosen[die] = draw
			done++
			around := near[start[die]:start[die+1]]
			links += len(around)
			for _, q := range around {
				if chosen[q] == draw {
					inside++
				}
			}
		}
		failFail := inside
		if !rareFails {
			failFail = c.Joins - (links - inside) // the joins that touch no pass
		}
		if float64(failFail) >= c.FailFail {
			if extreme++; extreme == enough {
				return float64(extreme) / float64(draw), fmt.Sprintf("permutation, stopped after %d placements", draw)
			}
		}
	}
	return float64(extreme+1) / float64(draws+1), fmt.Sprintf("permutation, %d placements", draws)
}

// adjacency lists every die's neighbours: those of the i-th die of g.order are
// near[start[i]:start[i+1]], as places in g.order.
func (g *Grid) adjacency(n Neighbours) (start, near []int32) {
	place := make([]int32, len(g.x))
	for i, r := range g.order {
		place[r] = int32(i)
	}
	steps := n.all()
	start = make([]int32, 1, len(g.order)+1)
	near = make([]int32, 0, len(g.order)*len(steps))
	for _, r := range g.order {
		for _, s := range steps {
			if q := g.at(r, s); q >= 0 {
				near = append(near, place[q])
			}
		}
		start = append(start, int32(len(near)))
	}
	return start, near
}
