package synth

import (
	"bytes"
	"embed"
	"fmt"
	"maps"
	"slices"

	"kneepoint/config"
)

//go:embed classes/*.yaml
var classFiles embed.FS

// ClassProducts returns invented products of three device classes, of about 20 V
// (reach-through), 45 V (thick epi) and 80 V (thick epi, field plate) of BVceo, each
// with nine tests and a healthy baseline: BVCBO, BVCEO, BVEBO, ICBO, HFE1 (10 uA),
// HFE2 (2 mA), VCESAT, COB and COB2 (low and high bias). Tests named in without are
// left out: COB and COB2, HFE1.
func ClassProducts(without ...string) []*config.Product {
	var out []*config.Product
	for _, name := range []string{"mp-n20.yaml", "mp-n45.yaml", "mp-n80.yaml"} {
		data, err := classFiles.ReadFile("classes/" + name)
		if err != nil {
			panic(err) // it is embedded
		}
		p, err := config.ParseProduct(name, data)
		if err == nil {
			p, err = Without(p, without...)
		}
		if err != nil {
			panic(err) // a test reads all of them
		}
		out = append(out, p)
	}
	return out
}

// Without returns a product with some of its tests left out, as another file with a
// hash of its own. The error names a test that the product does not have.
func Without(p *config.Product, tests ...string) (*config.Product, error) {
	if len(tests) == 0 {
		return p, nil
	}
	less := *p
	less.Tests = nil
	for _, name := range tests {
		if !slices.ContainsFunc(p.Tests, func(t config.Test) bool { return t.Name == name }) {
			return nil, fmt.Errorf("%s: has no test %q to leave out", p.File, name)
		}
	}
	for _, t := range p.Tests {
		if !slices.Contains(tests, t.Name) {
			less.Tests = append(less.Tests, t)
		}
	}
	if p.Baseline != nil {
		b := *p.Baseline
		b.Tests = maps.Clone(b.Tests)
		for _, name := range tests {
			delete(b.Tests, name)
		}
		less.Baseline = &b
	}
	var file bytes.Buffer
	if err := config.Write(&file, &less); err != nil {
		return nil, err
	}
	return config.ParseProduct(p.File, file.Bytes())
}
