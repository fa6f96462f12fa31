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
	radius := g.ringRadius()
	for i := range x {
		mmX, mmY := g.Position(x[i], y[i])
		r, s := ring(mmX, mmY, radius, rings), sector(mmX, mmY, sectors)
		if r < 0 || s < 0 {
			z.Missing++
			continue
		}
		z.Rings[r].add(pass[i])
		z.Sectors[s].add(pass[i])
		z.Cells[r][s].add(pass[i])
	}
	return z
}
