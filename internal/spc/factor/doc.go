// Package factor computes the constants that turn ranges and standard deviations
// of small normal samples into sigma, and back: d2, d3, c4, the median of the
// relative range, the standard error of the median, and the distributions of the
// relative range W = R/σ and of the relative standard deviation S/σ.
//
// Nothing is read from a table. Every constant is integrated once for each
// subgroup size and kept, so a later call costs one atomic load; all functions
// may be called from many goroutines. Handbook tables are rounded versions of
// these figures.
//
// All values are dimensionless. A subgroup size below 2 is ErrSubgroupSize; so is
// one above MaxSize where an integral over the range distribution is needed,
// because no plant draws such subgroups and the integrals grow slow there.
package factor
