// Package synth makes up lots: wafers of bipolar transistors that never
// existed, whose every failing die has a known cause.
//
// A made-up lot is worth having because its truth is known. Real data say what
// was measured and never for certain why; a made-up lot says which wafers got a
// thin epi layer and how many dice that cost, so an analysis can be rehearsed
// on it, calibrated on it and caught out by it.
//
// # How a lot is made
//
//  1. A [Grid] lays dice on the wafer, and the prober's sites and serpentine
//     order on the dice.
//  2. Every process quantity (a [Latent]: epi thickness, epi doping, base dose,
//     lifetime ...) is a field over the lot: a lot level, a wafer level, a smooth
//     part within the wafer (bowl and tilt) and a part of each die's own.
//  3. A [Cause] shifts latents at some [Place] of some wafers, damages single dice
//     there, or makes the tester read one test wrongly; [NewCause] makes those of
//     the cause catalogue.
//  4. The laws of [Laws] turn a die's latents into what its tests would ideally
//     read. Tests are correlated because they share latents, as in life: nothing
//     draws a correlation matrix.
//  5. The tester adds noise, an offset for each site, clamps and its resolution;
//     the program bins, stops at the first fail if it is that kind, measures some
//     dice again and loses some readings.
//
// [DemoSpec] is a whole example; [FromProduct] makes healthy lots of any product
// file. Levels are ratios around each test's Typical value, in the unit of its data
// file: the laws supply slopes, never absolute levels.
//
// # Lots drawn at random
//
// A [Maker] draws lots of a product for calibration and rehearsal. What is known
// holds: the baseline's levels, spreads and yield, the limits, the device. What is
// not known is drawn for each lot: the physics ([Laws] with slopes drawn around the
// reference model's, or [Physics], a variant of the device model), how a spread
// divides between lot, wafer, smooth shape and die, the shape of bowls, noise,
// resolution, site offsets, ends of range, retests, missing readings, what kind of
// defects make up the baseline's loss. A cause that is asked for is drawn in one of
// its [Varieties], on wafers and places of its own, and its size adjusted until it
// costs a wanted share of the dice; where the product's limits cannot see it, until
// it moves a test visibly, and the lot says so. [ClassProducts] are three invented
// products to try all that on.
//
// # Random numbers
//
// No number is drawn in sequence. Each is a hash of the seed, of what it is for
// and of the wafer and die it belongs to. So wafers can be made on any number of
// cores with the same bytes out, and switching a cause off (Cause.Off) leaves
// every other number as it was: the loss of a cause is the yield without it less
// the yield with it, die by die on the same random numbers ([Spec.Truth]).
//
// # What it must not be used for
//
// A made-up lot knows only the causes and the physics that were put in. It can
// show that an analysis is wrong; it cannot show that it is right on silicon.
// Never tune an analysis until it fits this generator, never quote its figures
// as those of a process, never mix its rows with measured ones, and never judge
// real parts by it. Spreads, noise and defect shares are common practice, no
// source; slopes are those of a numerical reference model and named where they
// are used.
package synth
