// Package junction is the device physics of a vertical bipolar transistor in an
// epi layer: what each electrical test reads as a function of the process
// (forward), and what the process must have been for what the tests read
// (inversion), with honest intervals.
//
// # The transistor
//
// An n+ substrate carries an n-type epi layer of some um and 1e14 to 1e16 cm^-3.
// A p base goes in from the top, an n+ emitter into the base. Reverse voltage on
// the collector is held by the base-collector junction, nearly all of it in the
// epi: the depletion layer grows down towards the substrate. What counts is the
// net epi, thickness less base depth and less the tail that the substrate sends up
// during the hot steps:
//
//	W = t - xjc - lam ln(Nsub/Nd)
//
// Tests see W, never t apart from the tail; they see the base width, hardly the
// two junction depths.
//
// # Breakdown
//
// Electrons that cross the layer ionise at a rate an(E), holes at ap(E) (van
// Overstraeten and de Man 1970). The ionisation integral
//
//	I = integral of an exp(-integral of (an - ap)),  M = 1/(1 - I)
//
// reaches 1 at avalanche breakdown (BVcbo), and 1/(1+hFE) at BVceo, where the open
// base multiplies what the junction multiplies: alpha0 M = 1. [Abrupt] solves it for
// the textbook junctions, [Model] for the diffused base on real epi. Where the
// junction bends up to the surface the field crowds, so the measured BVcbo is that
// of the edge or of a corner, far below the plane junction's; BVceo is the plane
// junction's as long as the edge holds. BVceo/BVcbo is therefore an edge indicator,
// not Miller's exponent.
//
// Closed forms stand beside the integral ([BaligaBreakdown], [SzeGibbonsBreakdown],
// [FulopBreakdown], [BaligaGhandhiCylinder], [MillerBVceo] ...), each NaN outside the
// range in which it holds. Reputable models differ by 10 to 20 % in volts, which is
// 15 to 30 % in doping. So levels are anchored: [NewModel] moves what nobody knows
// (ionisation fields, emitter Gummel number, stray capacitance, fixed resistance,
// lifetime) until the model's levels are the product's baseline, and everything
// after that is ratios to the baseline.
//
// # When is thickness seen?
//
// With x = W/wd, wd the depletion width at BVceo in endless epi,
//
//	d ln BVceo / d ln W = 2(1-x)/(2-x) for x < 1, and 0 from 1 up.
//
// Thin epi (reach-through) reads W, thick epi reads doping, and in between the
// readings are one-sided: epi that is too thin shows, epi that is too thick does
// not, and a normal BVceo proves nothing about enough thickness. Cob at low bias
// reads doping only (about N^0.4), Cob above punch-through reads W only; collector
// resistance reads W/N; Vcesat reads it too, through a conductivity modulation that
// nobody knows to better than a quarter unless it was calibrated.
//
// [Model.Invert] works on a grid of log W and log N for that reason: Gaussian
// intervals fail where a likelihood is flat on one side. Everything else (base dose
// and depths, emitter, edge, lifetime, modulation, series resistance) is integrated
// out around the grid on its linearisation, or reported beside it. Data alone and
// data with prior stand side by side; where data alone do not bound a quantity
// from both sides there is no estimate from them, and the reader is told.
// [Model.Separability] says what a set of tests cannot tell apart, and
// [Model.NextTest] which further test would tell most, in bits. [Model.Dice] does
// the same for each die, as points for maps, at about a microsecond.
//
// How far the model itself is trusted is part of every interval: the place of the
// knee, the slope on gain, a relative error of each response, and one that all tests
// of the collector layer share, since how much of the voltage falls in the base
// depends on a base profile that the product file gives in two numbers. Tests draw
// all of these at random, with other base profiles inside.
//
// # What is not modelled
//
// Local ionisation is not enough below 20 V (BVebo is a proxy, as is the oxide
// charge spread over 2 um of epi and the corner's geometry). No fall of gain at high
// current. The baseline, not the physics, places every level. Temperature is the
// chuck's few tens of kelvin, from published laws, not from the reference model,
// which is at 300 K. pnp devices are declined ([ErrPolarity]).
//
// # Sources
//
// van Overstraeten and de Man, Solid-State Electron. 13 (1970) 583. Miller, Phys.
// Rev. 105 (1957) 1246. Fulop, Solid-State Electron. 10 (1967) 39. Sze and Gibbons,
// Appl. Phys. Lett. 8 (1966) 111 and Solid-State Electron. 9 (1966) 831. Baliga and
// Ghandhi, Solid-State Electron. 19 (1976) 739. Hurkx, Klaassen and Knuvers, IEEE
// Trans. Electron Devices 39 (1992) 331. Slotboom and de Graaff, Solid-State Electron.
// 19 (1976) 857. Arora, Hauser and Roulston, IEEE Trans. Electron Devices 29 (1982)
// 292. Caughey and Thomas, Proc. IEEE 55 (1967) 2192. Thurber, Mattis, Liu and
// Filliben, J. Electrochem. Soc. 127 (1980) 1807. ASTM F723. Constants are from memory
// unless testdata/physics/PHYSICS.md, section 7, calls them confirmed; that page and
// the tables beside it are a numerical reference made outside the project, and
// TestPhysicsTables holds the model to every row.
package junction
