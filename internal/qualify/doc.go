// Package qualify is the installation qualification: it carries reference cases whose
// values were not made by this program, recomputes each on the machine at hand, and
// says what it expected, what it obtained, how far apart they are and how far apart
// they may be.
//
// Cases live in cases/ as data with their source. A case is published (its printed
// figure was seen), from memory (recalled from a publication and confirmed by
// recomputation) or computed (found independently of this program, by the method its
// file names). The allowance follows from the precision that the source prints, or from
// four standard errors where something is simulated. Most cases run through the topics
// of package calc, so that these are checked from input to output; what no topic asks
// for goes to the packages of the statistics themselves.
//
// The tests of this package run the same table as the command, so a case stands once.
package qualify
