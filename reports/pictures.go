package reports

// Pictures are the drawings that the page shows and the JSON leaves out.
type Pictures struct {
	Wafers  []Raster // one a wafer, in the order of Report.Wafers; empty without coordinates
	Stacked *Raster  // fail rate of each die position over all wafers; nil without coordinates
	Why     string   // why there are none

	Stacks   []Raster   // one for each of Report.Stacks, in its order
	Surfaces []Surfaces // of the tests that matter most

	// Epi is the layer die by die on the wafer that is farthest from the baseline: net
	// thickness where it is observable, and doping.
	Epi []Raster
}

// Surfaces is a test's typical wafer: the smooth part, and what is left of each
// position's median over the wafers.
type Surfaces struct {
	Test             string
	Smooth, Residual Raster
}

// Raster is a paletted PNG with one pixel a die (or a block of Step x Step dice
// when a wafer has too many), and what its pixels mean.
//
// Pixel (column, row) covers die x from X0+column*Step, and die y from
// Y0+row*Step when YDown, else from Y0-row*Step: row 0 is the top of the
// picture. The page shows it enlarged without smoothing and reads the die under
// the pointer back from the pixel's palette colour.
type Raster struct {
	Name                      string // wafer id, or what is stacked
	Columns                   int
	Rows                      int
	X0, Y0                    int
	YDown                     bool
	Step                      int
	Aspect                    float64 // die width / die height
	CentreColumn, CentreRow   float64 // wafer centre, in pixels from the top left corner
	RadiusColumns, RadiusRows float64 // wafer radius in pixels along each axis; 0 when not known
	Notch                     string  // down, up, left, right, or ""
	Legend                    []Swatch
	PNG                       []byte
}

// Swatch is one palette colour and its meaning.
type Swatch struct {
	R, G, B uint8
	Label   string
	Dice    int
}
