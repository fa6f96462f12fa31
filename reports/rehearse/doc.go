// Package rehearse tries the naming of causes on made-up lots of a product, whose
// causes are known.
//
// It has two uses. [Calibrate] makes lots, weighs the causes of each and fits the
// weights with which 80 % means 80 % on this very product with these very tests.
// [Run] makes other lots, of other seeds, puts them through the whole analysis with
// those weights, and counts: what was there against what was named, how often a told
// probability held, how small a loss is still found, what cannot be told apart, and
// which added test would help.
//
// # The made-up lots
//
// Lots are dealt by number, never by chance alone, so that any number of them has the
// same mix: healthy ones, single causes in the order of the catalogue, pairs, and
// lots with something wrong that no cause couples (two or three kinds of tests moved
// together by hand; truth "unexplained"). What a lot is in detail is drawn by package
// synth from the seed and the lot's number: directions, patterns, sizes that cost a
// wanted share of the dice, which wafers, tester, spreads, and the physics inside,
// which is either the device model in one of several variants or plain slopes drawn
// about the reference model's. Hence lots are the same on any number of cores.
//
// # What it cannot say
//
// Figures on made-up lots are about the analysis, not about silicon: they are what
// would come out if lots went wrong in the ways that package synth knows, each as
// often as dealt. A cause that is confused here will be confused on real lots; one
// that is told well here may still be told badly there.
package rehearse
