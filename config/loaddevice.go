package config

import (
	"fmt"
	"math"
)

// Bounds that silicon itself sets; they catch a value given in another unit.
const (
	maxConcentration = 5e22  // cm^-3; silicon has this many atoms (crystal density, textbook value from memory)
	maxResistivity   = 2.5e5 // ohm cm; intrinsic silicon at room temperature has about 2.3e5 (Sze, Physics of Semiconductor Devices, from memory)
	maxDepth         = 1000  // um; wafers are not thicker
)

func readDevice(c *collector, v any) *Device {
	d := &Device{}
	b := c.block("device", "device", v)
	b.missing("polarity", "write polarity: npn or polarity: pnp")
	d.Polarity = b.word("polarity", "npn", "pnp")

	epi := c.block("device.epi", "device.epi", b.values["epi"])
	d.Epi.ThicknessUM = epi.spec("thickness_um", "3.3", maxDepth)
	d.Epi.ResistivityOhmCM = epi.spec("resistivity_ohm_cm", "1.72", maxResistivity)
	d.Epi.UpDiffusionUM = epi.quantity("up_diffusion_um", "0.05", 0, maxDepth)
	d.Epi.SubstrateCM3 = epi.quantity("substrate_cm3", "5e18", above0, maxConcentration)
	d.Epi.SiliconConsumedUM = epi.quantity("silicon_consumed_um", "0.1", 0, maxDepth)

	base := c.block("device.base", "device.base", b.values["base"])
	d.Base.JunctionDepthUM = base.quantity("junction_depth_um", "0.75", above0, maxDepth)
	d.Base.SurfaceConcentrationCM3 = base.quantity("surface_concentration_cm3", "1.2e18", above0, maxConcentration)
	d.Base.AreaUM2 = base.quantity("area_um2", "60000", above0, math.Inf(1))
	d.Base.PerimeterUM = base.quantity("perimeter_um", "1000", above0, math.Inf(1))

	emitter := c.block("device.emitter", "device.emitter", b.values["emitter"])
	d.Emitter.DepthUM = emitter.quantity("depth_um", "0.25", above0, maxDepth)
	d.Emitter.AreaUM2 = emitter.quantity("area_um2", "20000", above0, math.Inf(1))
	d.Emitter.PerimeterUM = emitter.quantity("perimeter_um", "800", above0, math.Inf(1))

	edge := c.block("device.edge", "device.edge", b.values["edge"])
	d.Edge.CornerRadiusUM = edge.quantity("corner_radius_um", "20", above0, math.Inf(1))
	d.Edge.FieldPlate = edge.flag("field_plate")

	d.check(c)
	return d
}

// check finds what no transistor can be.
func (d *Device) check(c *collector) {
	thickness := d.Epi.ThicknessUM.Target
	if math.IsNaN(thickness) {
		thickness = d.Epi.ThicknessUM.Upper
	}
	used := d.Base.JunctionDepthUM.Value
	for _, q := range []Quantity{d.Epi.UpDiffusionUM, d.Epi.SiliconConsumedUM} {
		if !math.IsNaN(q.Value) {
			used += q.Value
		}
	}
	if used >= thickness {
		c.add("device.base.junction_depth_um", fmt.Sprintf("base, up-diffusion and consumed silicon take %s um and leave nothing of an epi layer of %s um",
			formatNumber(used), formatNumber(thickness)), "give depths from the surface, in micrometres, that add up to less than the layer")
	}
	if e, b := d.Emitter.DepthUM.Value, d.Base.JunctionDepthUM.Value; e >= b {
		c.add("device.emitter.depth_um", fmt.Sprintf("an emitter %s um deep leaves no base under a base junction at %s um",
			formatNumber(e), formatNumber(b)), "give depths from the surface in micrometres, the emitter's the smaller")
	}
	if e, b := d.Emitter.AreaUM2.Value, d.Base.AreaUM2.Value; e > b {
		c.add("device.emitter.area_um2", fmt.Sprintf("an emitter of %s um2 is larger than its base of %s um2",
			formatNumber(e), formatNumber(b)), "give areas in square micrometres, the emitter's the smaller")
	}
}

// above0 as the least value of a quantity means that zero is not allowed.
const above0 = math.SmallestNonzeroFloat64

// quantity reads a number or {value:, sigma:} between low and high.
func (b *block) quantity(key, example string, low, high float64) Quantity {
	none := Quantity{math.NaN(), math.NaN()}
	path := join(b.path, key)
	v := b.values[key]
	if v == nil {
		return none
	}
	q, valuePath := none, path
	if m, ok := v.(map[string]any); ok {
		in := b.block(path, "quantity", m)
		in.missing("value", "write {value: "+example+"}, with sigma: beside it if its spread is known")
		q.Value, q.Sigma = in.number("value", example), in.number("sigma", "0.05")
		valuePath = path + ".value"
		if q.Sigma < 0 {
			b.add(path+".sigma", formatNumber(q.Sigma)+" is negative", "give the standard deviation in the unit of the value")
		}
	} else {
		q.Value = b.number(key, example)
	}
	b.within(valuePath, q.Value, low, high, example)
	return q
}

// spec reads a number as target, or {target:, lower:, upper:}; each is above
// zero and at most high.
func (b *block) spec(key, example string, high float64) Spec {
	s := Spec{math.NaN(), math.NaN(), math.NaN()}
	path := join(b.path, key)
	v := b.values[key]
	if v == nil {
		return s
	}
	m, ok := v.(map[string]any)
	if !ok {
		s.Target = b.number(key, example)
		b.within(path, s.Target, above0, high, example)
		return s
	}
	in := b.block(path, "spec", m)
	for _, one := range []struct {
		key string
		to  *float64
	}{{"target", &s.Target}, {"lower", &s.Lower}, {"upper", &s.Upper}} {
		*one.to = in.number(one.key, example)
		b.within(path+"."+one.key, *one.to, above0, high, example)
	}
	switch {
	case s.Upper < s.Lower:
		b.add(path+".upper", fmt.Sprintf("upper %s is below lower %s", formatNumber(s.Upper), formatNumber(s.Lower)), "swap them, or mend the one that is wrong")
	case s.Target < s.Lower || s.Target > s.Upper:
		b.add(path+".target", fmt.Sprintf("target %s is outside of its limits %s", formatNumber(s.Target), limitText(s.Lower, s.Upper)),
			"give a target between lower and upper")
	}
	return s
}

func (b *block) within(path string, v, low, high float64, example string) {
	switch {
	case v < low && low == above0:
		b.add(path, formatNumber(v)+" is not above zero", "write a number such as "+example)
	case v < low:
		b.add(path, formatNumber(v)+" is negative", "write a number such as "+example)
	case v > high:
		b.add(path, fmt.Sprintf("%s is more than silicon allows (%s)", formatNumber(v), formatNumber(high)), "give it in the unit that the key names, such as "+example)
	}
}

func limitText(lower, upper float64) string {
	switch {
	case math.IsNaN(lower):
		return "up to " + formatNumber(upper)
	case math.IsNaN(upper):
		return "from " + formatNumber(lower)
	}
	return formatNumber(lower) + " to " + formatNumber(upper)
}
