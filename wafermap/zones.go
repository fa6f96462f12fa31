package wafermap

// ZoneCount is the dice and passing dice of one zone.
type ZoneCount struct{ Dice, Passing int }

func (z *ZoneCount) add(pass bool) {
	z.Dice++
	if pass {
		z.Passing++
	}
}

// Zones counts dice by where they lie.
type Zones struct {
	Rings   []ZoneCount   // centre first
	Sectors []ZoneCount   // counter-clockwise from +x
	Cells   [][]ZoneCount // [ring][sector]
	Missing int           // rows without a place
}

// ZoneYields counts tested and passing dice in rings of equal area and in
// sectors (see Geometry.Ring and Geometry.Sector). Rows may be of many wafers; each
// row counts. Dice without coordinates, and all dice when the geometry is not
// known, are counted in Missing.
func ZoneYields(g Geometry, x, y []int32, pass []bool, rings, sectors int) Zones {
	if len(x) != len(y) || len(x) != len(pass) {
		panic("wafermap: x, y and pass differ in length")
	}
	z := Zones{Rings: make([]ZoneCount, rings), Sectors: make([]ZoneCount, sectors), Cells: make([][]ZoneCount, rings)}
	for i := range z.Cells {
		z.Cells[i] = make([]ZoneCount, sectors)
	}
	for i := range x {
		ring, sector := g.Ring(x[i], y[i], rings), g.Sector(x[i], y[i], sectors)
		if ring < 0 || sector < 0 {
			z.Missing++
			continue
		}
		z.Rings[ring].add(pass[i])
		z.Sectors[sector].add(pass[i])
		z.Cells[ring][sector].add(pass[i])
	}
	return z
}
