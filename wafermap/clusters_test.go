package wafermap

import (
	"math"
	"slices"
	"testing"
)

// draw reads a picture: '#' fails, '.' passes, ' ' no die; y grows downwards.
func draw(rows ...string) (x, y []int32, fail []bool) {
	for j, row := range rows {
		for i, c := range row {
			if c != ' ' {
				x, y, fail = append(x, int32(i)), append(y, int32(j)), append(fail, c == '#')
			}
		}
	}
	return x, y, fail
}

func TestClusters(t *testing.T) {
	x, y, fail := draw(
		" ##..  ",
		".#..#..",
		"..##..#",
		" ....# ",
	)
	g := NewGrid(x, y)
	rook := g.Clusters(fail, Rook, 1)
	if len(rook) != 5 {
		t.Fatalf("%d rook clusters, want 5", len(rook))
	}
	if c := rook[0]; c.Dice != 3 || c.MinX != 1 || c.MaxX != 2 || c.MinY != 0 || c.MaxY != 1 || math.Abs(c.CentreX-4.0/3) > 1e-15 || math.Abs(c.CentreY-1.0/3) > 1e-15 {
		t.Errorf("largest: %+v", c)
	}
	if c := rook[1]; c.Dice != 2 || x[c.Rows[0]] != 2 || x[c.Rows[1]] != 3 {
		t.Errorf("second: %+v", c)
	}
	// equal ones by their first die: (4,1), (6,2), (5,3)
	for i, want := range []int32{4, 6, 5} {
		if got := x[rook[2+i].Rows[0]]; got != want {
			t.Errorf("single %d at x = %d, want %d", i, got, want)
		}
	}
	queen := g.Clusters(fail, Queen, 2)
	if len(queen) != 2 || queen[0].Dice != 6 || queen[1].Dice != 2 {
		t.Errorf("queen clusters of at least two: %+v", queen)
	}
	if c := g.Clusters(fail, Queen, 7); len(c) != 0 {
		t.Errorf("%d clusters of at least 7", len(c))
	}
	if c := g.Clusters(make([]bool, len(fail)), Queen, 1); len(c) != 0 {
		t.Errorf("%d clusters without fails", len(c))
	}
}

func TestLabelsFollowRasterOrderWhateverTheRowOrder(t *testing.T) {
	x, y, fail := draw("#.#", "..#", "#..")
	slices.Reverse(x)
	slices.Reverse(y)
	slices.Reverse(fail)
	labels, groups := NewGrid(x, y).Labels(fail, Rook)
	if want := []int32{0, 0, 3, 2, 0, 0, 2, 0, 1}; groups != 3 || !slices.Equal(labels, want) {
		t.Errorf("labels %v, want %v", labels, want)
	}
}

func TestClustersDoNotSeeOrientation(t *testing.T) {
	x, y := disc(12)
	fail := scatter(len(x), 0.35, 2)
	sizes := func(c []Cluster) (s []int) {
		for _, k := range c {
			s = append(s, k.Dice)
		}
		return s
	}
	for _, n := range []Neighbours{Rook, Queen} {
		want := sizes(NewGrid(x, y).Clusters(fail, n, 1))
		for i, move := range isometries {
			if got := sizes(NewGrid(moved(x, y, move)).Clusters(fail, n, 1)); !slices.Equal(got, want) {
				t.Errorf("%v, isometry %d: %v, want %v", n, i, got, want)
			}
		}
	}
}

func TestDensityClusters(t *testing.T) {
	x, y, fail := draw(
		"###...#",
		"###....",
		"...#...",
		".......",
		"#....##",
	)
	g := NewGrid(x, y)
	d := g.DensityClusters(fail, 1.5, 1, 1, 4)
	if d.Clusters != 1 || d.Noise != 4 {
		t.Errorf("%d clusters, %d noise; want 1 and 4", d.Clusters, d.Noise)
	}
	if r := g.Index(3, 2); d.Labels[r] != 0 || d.Core[r] {
		t.Error("(3, 2) is a border die of the block")
	}
	if r := g.Index(0, 4); d.Labels[r] != -1 {
		t.Error("(0, 4) is noise")
	}
	// dice twice as high as wide: rows are 2 apart and out of reach
	if d := g.DensityClusters(fail, 1.5, 1, 2, 3); d.Clusters != 2 {
		t.Errorf("high dice: %d clusters, want the two rows of the block", d.Clusters)
	}
	if d := g.DensityClusters(fail, 0, 1, 1, 1); d.Clusters != count(fail) || d.Noise != 0 {
		t.Errorf("reach 0: %d clusters", d.Clusters)
	}
	if d := NewGrid(nil, nil).DensityClusters(nil, 1, 1, 1, 1); d.Clusters != 0 {
		t.Error("clusters on no dice")
	}
}
