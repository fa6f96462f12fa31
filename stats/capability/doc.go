// Package capability says how a test's readings fit between its limits.
//
// Pp and Ppk compare the limits with the overall spread, all wafers together:
// what a customer gets. Cp and Cpk compare them with the spread within wafers:
// what the process could do if every wafer had the same mean. Cp and Pp ignore
// where the mean is; Cpk and Ppk take the limit that is nearer.
//
//	Cp  = (U - L) / 6 sigma        Cpk = min(mean - L, U - mean) / 3 sigma
//
// # What the intervals mean
//
// An index from 30 readings of a true 1.33 may well come out at 1.0 or 1.7; no
// index is given without its interval. And readings are not all that is drawn:
// two million dice from 25 wafers tell the mean of the process as well as 25
// wafers can. So where readings have a subgroup, the overall indices' intervals
// count the wafers' differences once a wafer, not once a die.
//
// # What the indices assume
//
// A normal shape: the indices translate into parts per million only by it. A
// Note says when the readings have another one. Readings at a tester's clamp are
// used as bounds, through a censored fit.
//
// For any other shape, or for readings that are mostly bounds, [ByPercentiles]
// takes the percentiles of a fitted distribution, or of the readings themselves,
// in place of mean and sigma, and gives the share of the population expected
// outside the limits, with its interval. [ToleranceTwoSided] and its like turn the
// question round: between which limits does a given share lie.
//
// Sources: ISO 22514-2; NIST/SEMATECH e-Handbook 6.1.6; Bissell 1990, J. R.
// Statist. Soc. C 39, 331-340.
package capability
