package wafermap

// FindGeometry finds the wafer under the dice of a lot.
func FindGeometry(x, y []int32, known Known) Geometry {
	b := bulk(x, y)
	g := Geometry{DiameterMM: known.DiameterMM, DieWidthMM: known.DieWidthMM, DieHeightMM: known.DieHeightMM, EdgeExclusionMM: known.EdgeExclusionMM, Notch: known.Notch, YDown: known.YDown, Unit: "mm"}
	g.CentreX, g.CentreY = float64(b.X0+b.X1)/2, float64(b.Y0+b.Y1)/2
	return g
}
