// Package yield counts good dice and says where the others went.
//
// Its nouns: a die passes or fails as its bin says. A test fails a die when the
// reading is beyond a limit; a reading at the limit passes. A blank reading
// fails nothing. The first failing test, in program order, takes the loss of a
// die (first); a die that only one test fails could be saved by that test
// (alone); and every test that fails it has a part in it (any).
//
// A test program that stops at the first failing test never shows what later
// tests would have said. There alone and any cannot be known, whatever one may
// compute, and moving a limit outwards has no known effect; [TestLosses] finds
// such programs from the blanks they leave.
//
// # How sure is a yield
//
// Two questions, two intervals. [Wilson] answers the one of counting: if dice
// fail independently, what is the chance of a good one. [Process] answers the
// one that is meant most often: what will this process yield on other wafers
// like these. Dice of a wafer share its fate, so the second interval is wider,
// often ten times, and is set by how much the wafers differ.
//
// # Defects and where loss comes from
//
// A [Model] ties yield to the density of killing defects; [FitDefects] estimates
// density and clustering from counts. [Windows] splits the loss of a lot into what
// dice lose one by one and what they lose together.
package yield
