package wafermap

import "image/color"

// Codes of a die in a picture of states. PaintStates takes any code that its
// palette has; these are the ones of DefaultPalette.
const (
	StateNone     uint8 = iota // no die, or left out
	StatePass                  // passes
	StateFail                  // fails
	StateLead                  // fails the test that loses most
	StateOther                 // tested, but without a result
	StateMarginal              // passes close to a limit
)

// DefaultPalette has a colour for each state. It falls in lightness from pass to
// the leading fail, so that grey print and colour-blind eyes keep the states
// apart, and uses no pair that differs by red against green alone.
var DefaultPalette = []color.RGBA{
	StateNone:     {0, 0, 0, 0},
	StatePass:     {239, 233, 220, 255},
	StateFail:     {31, 115, 168, 255},
	StateLead:     {84, 16, 60, 255},
	StateOther:    {190, 199, 214, 255},
	StateMarginal: {222, 158, 48, 255},
}

// StateLabels names the states for a legend, by code; lead is the name of
// the test that loses most, "" when there is none.
func StateLabels(lead string) []string {
	fails, leads := "fails", "fails the leading test"
	if lead != "" {
		fails, leads = "fails another test", "fails "+lead+" first"
	}
	return []string{StateNone: "no die", StatePass: "passes", StateFail: fails, StateLead: leads,
		StateOther: "no result", StateMarginal: "passes near a limit"}
}
