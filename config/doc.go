// Package config reads what a person tells kneepoint: the product file, which
// says what is tested and on what device, and the settings, which say how lots
// are looked at. It imports nothing of the project.
//
// Its stance: a file is used as it stands or not at all. Every problem is
// reported at once, a line each with the key, what is wrong and what would be
// right ([Problems]); nothing is guessed, corrected or passed over. A key that is
// not known is a problem, because a misspelt limit that is ignored passes dice.
//
// # Product file
//
// YAML, TOML or JSON, told by the extension (.yaml, .yml, .toml, .json); UTF-8,
// at most 4 MB. [LoadProduct] reads it, [Write] drafts it. In YAML:
//
//	product: MP-N24
//	device:
//	  polarity: npn
//	  epi:
//	    thickness_um: {target: 3.3, lower: 3.1, upper: 3.5}
//	    resistivity_ohm_cm: {target: 1.72, lower: 1.55, upper: 1.90}
//	    up_diffusion_um: {value: 0.05, sigma: 0.01}
//	  base: {junction_depth_um: 0.75, surface_concentration_cm3: 1.2e18, area_um2: 60000, perimeter_um: 1000}
//	  emitter: {depth_um: 0.25, area_um2: 20000, perimeter_um: 800}
//	  edge: {corner_radius_um: 20, field_plate: false}
//	wafer: {diameter_mm: 100, die_width_mm: 0.45, die_height_mm: 0.45, edge_exclusion_mm: 3, notch: down}
//	columns: {x: DIE_X, y: DIE_Y}
//	bins: {pass: [1, 2], names: {1: gain grade A, 2: gain grade B, 5: breakdown}}
//	test_temperature_c: 25
//	tests:
//	  - {name: BVCEO, measures: bvceo, unit: V, lower: 22.5, at: "IC=1mA", clamp: 60}
//	  - {name: ICBO, measures: icbo, unit: nA, upper: 5, at: "VCB=20V", floor: 0.01}
//	  - {name: HFE1, measures: hfe, lower: 70, upper: 250, at: "IC=10uA, VCE=5V"}
//	baseline:
//	  yield: 0.95
//	  tests: {BVCEO: {median: 24.8, sigma: 0.6, within_lot_sigma: 0.5, lot_sigma: 0.3}}
//	causes: []
//
// Only tests must be there. Keys and words match in any case; two tests may not
// differ in case alone, since data files are matched without it. A key without a
// value counts as absent.
//
// product: the part type, as reports and folders of product files name it.
//
// device: what the device model needs; without it causes are named from the
// data alone. polarity is npn or pnp. A quantity is a number or {value, sigma};
// thickness_um and resistivity_ohm_cm are a number, the target, or {target,
// lower, upper}. thickness_um is the epi layer as grown, from the surface to the
// substrate's plateau; up_diffusion_um, silicon_consumed_um (by oxidation) and
// substrate_cm3 are optional. Depths are from the surface.
//
// wafer: diameter_mm, die_width_mm and die_height_mm with the street,
// edge_exclusion_mm (0 is none), notch (down, up, left, right) and shot, the
// columns and rows of dice in an exposure shot.
//
// columns: headers of the data file by role, where they are not the usual ones:
// lot, wafer, x, y, site, touchdown, hard_bin, soft_bin, pass, test, value, unit,
// lower, upper, time, part.
//
// bins: the passing bins (pass; bin 1 without it) and names for any.
//
// test_temperature_c: of the chuck, -100 to 400; 25 when absent.
//
// tests: a list. name as in the data file; measures one of bvceo bvcbo bvebo
// bvces icbo iceo iebo hfe vcesat vbesat rb rc rpinch cob ft, or absent for any
// other test; unit as [ParseUnit] reads it, of the limits, the baseline and the
// data (absent: SI units, or a ratio); lower and upper limits, which outrank
// those of the data file; at, the bias conditions, as [ParseConditions] reads
// them; clamp, the largest value the tester returns, and floor, the smallest it
// can tell from nothing. Readings there count as bounds.
//
// baseline: a typical healthy lot. yield as a share; under tests by name the
// median, the robust sigma of passing dice pooled over healthy lots, and if known
// its parts, within_lot_sigma and lot_sigma.
//
// causes: the site's own causes in the form of the built-in catalogue, handed on
// as they stand.
//
// # Settings
//
// [LoadSettings] takes them from a settings file (the same formats), over it from
// the environment (KNEEPOINT_ and the name in capitals), over that from the
// command's flags. Nothing needs to be set; see [DefaultSettings].
//
//	workers: 0                # cores to use, 0 all
//	retest: last              # which measurement of a retested die counts: last, first, best
//	count_edge_dice: true     # dice in the edge exclusion count in yield
//	marginal_percent: 10      # a fail within this much of its limit is marginal
//	limit_shift_percent: 10   # limits are moved this far either way for yield against limit
//	minimum_n: 25             # fewest readings for a capability index
//	rings: 5                  # zones of a wafer
//	sectors: 8
//
// The confidence of intervals is fixed at 0.95.
//
// # Units
//
// Values in a [Product] are SI, but for geometry, whose names carry their unit.
// [Unit.ToSI] and [Unit.FromSI] move the decimal point exactly: what a file says
// is what is shown, and a reading that equals a limit does so in any unit.
package config
