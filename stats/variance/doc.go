// Package variance says at which level the spread of a test arises: between
// lots, between wafers of a lot, between zones of a wafer, or between the dice
// of a zone.
//
// The model is nested: every reading is a sum of independent deviations, one for
// each group that it belongs to,
//
//	y = mean + lot + wafer(lot) + zone(wafer) + die
//
// and each kind of deviation has a variance of its own, the components. Their
// sum is the variance of a die drawn anywhere; their shares say where to look for
// a cause. A [Design] holds the readings summarised by cell, the groups of the
// innermost level: count, mean and sum of squares tell everything that the model
// can use, so a lot of two million dice costs one walk over the readings and no
// more.
//
// # Two estimators
//
// [Design.REML] maximises the likelihood of what is left when the mean is
// taken out; it handles designs in which wafers have lost dice and lots have lost
// wafers, keeps components from going below zero, and comes with profile
// intervals. [Design.ML] is its relative that forgets that the mean was estimated, and
// is biased low with few lots. [Design.ANOVA] equates mean squares with what they
// should be on average: simple and exact for balanced designs, where it agrees
// with REML as long as no estimate is negative. A negative estimate is shown as
// it is: it says that the true component is small, or that groups are more alike
// than chance would make them.
//
// # What a zone is
//
// Zones (centre, ring, edge; test sites; reticle fields) are the same places on
// every wafer. What all wafers share of them is a pattern, not a draw: seeing it
// on 25 wafers is seeing one pattern 25 times. Mark such a level with
// [Level.Repeats]; the pattern then gets a row of its own, and the zone
// component is what each wafer adds to it.
//
// # How many groups
//
// A component is known about as well as a variance from as many values as there
// are groups: three lots say next to nothing about the spread between lots, and
// its interval shows that. A level that has one group in each group above it
// cannot be told from it: it gets no number, and a Why.
//
// Sources: Searle, Casella and McCulloch 1992, Variance Components; Patterson and
// Thompson 1971, Biometrika 58, 545-554 (REML); Burdick and Graybill 1992,
// Confidence Intervals on Variance Components.
package variance
