// Package dist fits distributions to readings, some of which may be known only
// as bounds.
//
// A tester that clamps at 80 V does not say that a die breaks down at 80 V, it
// says "at least 80 V"; a leakage under the floor of the meter is "at most" the
// floor. Taken at face value such readings pull the mean inwards and make the
// spread, and every capability index with it, look better than it is; left out,
// they do worse. The fits here use each reading for what it says: the density
// for an exact one, the probability beyond (or below, or between) for a bound.
//
// All fits are by maximum likelihood; standard errors come from the observed
// information, the curvature of the log-likelihood at its top.
package dist
