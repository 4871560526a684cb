// Package limits turns a standard (a centre and a sigma) into control limits for
// every kind of chart, estimates the standard from history, and studies that
// history for trial limits.
//
// It decides where the limits of a plotted statistic lie and how far one sigma is
// on each side; it does not judge points by run rules (package watch) and knows
// nothing of time, parts or people. It uses the standard library only.
//
// Input that a person can cause and that has no answer (a sigma of zero, a NaN
// among the readings, a subgroup too small for its chart) is an error which names
// the argument. No function returns a NaN without one.
package limits
