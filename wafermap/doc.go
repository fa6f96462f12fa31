// Package wafermap looks at where on the wafer dice fail: it lays the dice out
// on their grid, finds the wafer round them, and puts numbers on what an eye
// sees in a map.
//
// # The nouns
//
// A die is one chip of the wafer and has integer coordinates x and y, counted in
// dice along the rows and columns of the grid. The pitch is the distance from
// one die to the next along x (die width) and along y (die height), both with
// the saw street. The wafer is a disc; its notch (or flat) marks its
// orientation and lies "down", "up", "left" or "right" in the map. The edge
// exclusion is the rim, a few millimetres wide, where the process is not
// held to its limits; most products test only dice that lie wholly inside it.
// The outline is the smallest circle round the dice that were tested: with the
// corner rule just named, it has the radius of the wafer less the exclusion.
//
// A Geometry turns die coordinates into lengths from the wafer's centre, x to
// the right and y up. It is taken from the product file as far as that gives it,
// and found from the outline of the tested dice for the rest (FindGeometry).
// Rings cut the tested disc into equal areas, so that each has about the
// same number of dice; sectors cut it like a cake, counter-clockwise from +x.
//
// A Grid is one wafer's dice with an index from position to row. Neighbours
// are dice that touch along a side (Rook: up to 4) or at a side or corner (Queen:
// up to 8); a position with no tested die is nobody's neighbour, so the rim and
// holes of a map need no special case. A join is a pair of neighbours, each
// pair counted once. Where fails keep together there are more joins between
// two fails, and fewer between a pass and a fail, than if the same number of
// fails were thrown on the tested dice at random; JoinCount says how many more,
// in standard deviations (z), and how often chance does as much (p).
// Autocorrelation asks the same of a measured value (Moran's I, Geary's C).
//
// FailSpots, HotSpots and LocalMoran say which dice do so.
//
// Clusters are groups of fails that hang together neighbour by neighbour (components);
// DensityClusters groups by local density and forgives gaps. A Scan looks for the circle or
// ellipse with the most surplus of fails and compares it with random placements of as many.
// A component says how fails hang together, a scan whether that is more than chance.
//
// A Surface is the smooth shape of a value over the disc, in Zernike terms; its Residual is
// what is left, a map again. A SurfaceBasis is what fits to several values of the same dice
// share, and the fast way; ZernikeFit is the plain least-squares fit.
//
// A Signature is a pattern of fails with a name: an edge ring, a line, a repeat of the
// exposure's shot and so on. It has an Outline, which says where it lies, a Strength and Loss
// (the shares of fails and of dice that it costs) and a PValue (how often a wafer without
// patterns shows as much). A wafer has several signatures, or one that says there is nothing:
// "random" (fails without structure) or "none" (too few fails to say so).
//
// A Stack lays the wafers of a lot on each other and counts, for each die position, on how
// many wafers it fails. A Repeater is a position that fails on more of them than chance
// would have it. Groups sort the wafers of a lot by how alike their maps are. A Picture is a
// painted map as PNG, with Swatches for its legend.
//
// A typical use, wafer by wafer:
//
//	geometry := FindGeometry(x, y, known) // once for the lot, of all its dice
//	grid := NewGrid(x, y)                 // of one wafer
//	joins := grid.JoinCount(fail, Queen)
//	found := Signatures(SignatureInput{Grid: grid, Geometry: geometry, Fail: fail, Site: site, Order: touchdown})
//	for _, s := range found {
//		fmt.Println(s.Kind, s.Text(geometry.Unit), s.Loss, s.PValue)
//	}
//
// # The rules
//
// Functions take slices and never modify them. A die whose x or y is Missing
// has no place: it is skipped and counted. Where two rows have the same
// position, the last row is the die's and the others are counted as
// duplicates. Slices of unequal length are a programmer's error and panic; data
// never do. What cannot be computed is NaN and comes with a Why. The same input
// gives the same output bit for bit: random draws have fixed seeds.
package wafermap

import "math"

// Missing stands for a coordinate that the data file does not have. It equals
// ingest.Missing.
const Missing = -1 << 31

// placed reports whether a die has both coordinates.
func placed(x, y int32) bool { return x != Missing && y != Missing }

var nan = math.NaN()
