package wafermap

// SignatureInput is one wafer's fails.
type SignatureInput struct {
	Grid     *Grid
	Geometry Geometry
	Fail     []bool

	Site, Order           []int32
	ShotColumns, ShotRows int
}

// Signature is one pattern.
type Signature struct {
	Kind     string
	Strength float64
	PValue   float64
	Loss     float64
	Dice     []int32

	pattern *pattern
}

// Signatures finds patterns.
func Signatures(in SignatureInput) []Signature {
	in.Grid.check(len(in.Fail))
	f := newField(in)
	if f.total.o < 3 {
		return []Signature{{Kind: "none"}}
	}
	found := f.search()
	var out []Signature
	for _, x := range found {
		if x.hidden {
			continue
		}
		out = append(out, Signature{Kind: shapeKind[x.shape], pattern: x.pattern})
	}
	if len(out) == 0 {
		out = append(out, Signature{Kind: "random"})
	}
	return out
}
