// Package causes says why a lot lost yield: it turns what the tests show into
// evidence, evidence into likelihood, and likelihood into the probability that
// each cause of a catalogue is present.
//
// # The nouns
//
//   - Columns are the lot's readings as plain slices, with what is known of its
//     tests; the room knows no file and no Lot.
//   - Evidence is what Observe sees in them: levels by wafer and zone against
//     the baseline (the parametric part), dice that stand alone and of which
//     class (short, open, pipe, ...), where those lie on the wafer, and flags of
//     the tester (one site alone, bursts, recovery on retest, pile-ups).
//   - A Catalogue is data: for each cause the process parameters it shifts, the
//     classes of dice it makes, the map patterns it leaves and the flags it
//     raises. catalogue.yaml is the built-in one; a site's own causes come from
//     the product file in the same form.
//   - Weigh compares hypotheses: nothing wrong, something unknown, each cause,
//     each pair of the likely ones.
//
// # How a hypothesis is judged
//
// A hypothesis has a log likelihood ratio against "nothing wrong" in each of
// several views:
//
//   - lot: the typical wafer's levels against the baseline. The device model says
//     how every test moves with the parameter; its size is unknown and is
//     integrated out over a grid. The spread of healthy lots is that of the
//     baseline, correlated as the usual variation of the process correlates it.
//   - wafers: how single wafers stand against the typical one.
//   - zones: how zones of wafers stand against their wafer: the direction over
//     tests of smooth variation.
//   - dice: the classes of the dice that stand alone.
//   - maps: the patterns that those dice form.
//   - flags: what the order of test, the sites and retests tell.
//   - loss: whether yield is lost at all.
//
// The views of one lot are not independent and no model of them is exact, so each
// view counts with a weight. The weights and the odds of "nothing" and "unknown"
// are fitted on made-up lots of the very product and set of tests, whose causes
// are known (Fit), by maximum likelihood drawn towards usual values: that is what
// makes 80 % mean 80 %. Tempered likelihoods of this kind are common in pooling
// expert evidence (Genest and Zidek, Statist. Sci. 1 (1986) 114: the logarithmic
// opinion pool).
//
// # What is said and not guessed
//
// Causes whose directions over the tests at hand are alike (cosine above 0.95,
// whitened) cannot be told apart by levels, and Alike says so, and whether this lot
// decides between them all the same. What further measurement would split them is
// ranked by expected information (Next). A few hundredths of every probability are
// kept for lots that are like no model (keptBack).
package causes
