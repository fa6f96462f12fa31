package causes

import "math"

// Zones of a wafer: the centre, four quarters of a middle ring, four of an outer
// one, of about equal area.
const (
	zones     = 9
	innerEdge = 0.33 // of the radius
	outerEdge = 0.70
)

// Evidence is what Observe saw. Levels are natural logs of a level over the
// healthy one, NaN where there are too few dice.
type Evidence struct {
	cols  *Columns
	frame *frame // the space of its levels; read only

	Reference []float64 // by test: the healthy level, SI
	Scatter   []float64 // by test: sigma of a die's log reading about its zone
	Lot       []float64 // by test: level of the typical wafer
	Wafers    []WaferEvidence
	Dice      int
	Failing   int // failing dice

	Flags map[string]bool // of the catalogue; absent: cannot be told

	Stacked []Pattern // of single dice over all wafers, by group

	class []int8 // by row: class of the dice that stand alone, -1 for the others
	zone  []int8 // by row, -1 without a place
}

// WaferEvidence is one wafer's part.
type WaferEvidence struct {
	ID       string
	Dice     int
	Failing  int
	Level    []float64        // by test
	Sampling []float64        // by test: standard error of Level
	Zone     [zones][]float64 // by test: level of the zone less Level; nil: no dice
	ZoneDice [zones]int
	Single   []float64 // by class: dice that stand alone, shared among likely classes
	Patterns []Pattern
}

// Pattern is a map pattern of the single dice of one group of classes.
type Pattern struct {
	Group string
	Kind  string
	Loss  float64 // share of the wafer's dice
	P     float64

	rows []int32 // dice inside its outline, counted from the wafer's first
}

// single counts the dice that stand alone, by class, over all wafers.
func (e *Evidence) single(classes int) []float64 {
	sum := make([]float64, classes)
	for i := range e.Wafers {
		for c, n := range e.Wafers[i].Single {
			sum[c] += n
		}
	}
	return sum
}

func (e *Evidence) yield() float64 {
	if e.Dice == 0 {
		return math.NaN()
	}
	return 1 - float64(e.Failing)/float64(e.Dice)
}
