// Package dist fits distributions to readings, some of which may be known only
// as bounds, and says which of them describes the readings and how well.
//
// A tester that clamps at 80 V does not say that a die breaks down at 80 V, it
// says "at least 80 V"; a leakage under the floor of the meter is "at most" the
// floor. Taken at face value such readings pull the mean inwards and make the
// spread, and every capability index with it, look better than it is; left out,
// they do worse. The fits here use each reading for what it says: the density
// for an exact one, the probability beyond (or below, or between) for a bound.
// Readings that were screened, so that those beyond a limit are not in the data
// at all, are another matter: see [Readings].
//
// # Fits
//
// [Fit] and its short forms ([FitNormal], [FitLognormal], [FitWeibull],
// [FitGamma]) are by maximum likelihood; standard errors come from the observed
// information, the curvature of the log-likelihood at its top. [ProfileQuantile]
// and [QuantileInterval] give intervals of quantiles, [ShareInterval] of the
// share beyond a limit. [FitNormalGroups] has a mean for each wafer.
//
// # Which distribution
//
// [Choose] says in words which family it takes and why; [SizeOfMisfit] how far
// the readings are from it in terms that do not grow with n. [TestNormal],
// [TestWeibull] and [AgainstKnown] are the usual tests, which reject every
// distribution once n is large enough.
//
// # More than one population
//
// [FitMixtures] fits one to four normal parts; [Mixture.Populations] merges those
// that overlap, and [Split] deals the dice out to what is left.
//
// # Pictures
//
// [Empirical] is the distribution function that the readings show by themselves;
// [ProbabilityPlot] sets it against a fit.
package dist
