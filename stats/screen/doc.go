// Package screen finds dice that pass every limit and still do not belong: they
// differ from the dice made with them, which is how latent defects look before
// they fail in the field.
//
// # Against the others of the lot
//
//   - [PartAverage]: limits at a robust mean and six robust sigmas of the test's
//     own readings (dynamic part average limits), and [Static] from several lots.
//   - [RobustDistance]: dice whose readings are unusual together though each is
//     in place by itself.
//   - [Grubbs] and [GESD]: is the one most extreme reading, or are the few, an
//     outlier at all. For tens of readings (wafer medians, say), not for millions.
//
// # Against their neighbours
//
//   - [NeighbourResidual]: readings far from the level of the dice around them,
//     whatever the wafer's pattern.
//   - [BadNeighbourhood]: good dice among failing ones.
//
// Every screen costs good dice. [CostOf] and [Costs] say how many, before anyone
// decides. Screening is a proposal for people who answer for the product: which
// dice are scrapped follows site rules and customer agreements.
//
// NaNs are skipped; a reading marked "at least" or "at most" is screened only
// where what is known of it is already beyond the limit. Slices of different
// length panic.
//
// Sources: AEC-Q001 (part average testing; formulas from memory, as the reference
// cases say); the rest is named where it is used.
package screen
