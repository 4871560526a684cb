// Package watch judges a process point by point: run rules, EWMA and CUSUM as
// one fold, state and point in, state and firings out.
//
// The state is a handful of numbers, so judging costs the same however long the
// history is, and the same code serves the live write path, the replay of a
// history and the correction of an old sample. Zero is always the state just
// after a boundary: nothing remembered.
//
// Every run rule is read as one sentence: at least k of the last m points have a
// property, and the current point is one of them. One bit a point in a 64-bit
// register holds who had it; a window is a mask and a population count. What can
// no longer change any future firing is cleared at once, so that two states with
// the same future compare equal with ==. That lets a correction stop folding as
// soon as it meets the old state again, and lets run lengths be solved on as few
// states as exist.
//
// Three layers, each usable alone:
//
//   - Rules (Rule, Compile, State) judges points already in sigma distances.
//   - EWMA and CUSUM step their own small states.
//   - Judge turns a subgroup into plotted points with their limits, and folds all
//     of the above over one Memory. A Standard without a Model is a plain chart of
//     readings; the Models are the other kinds of chart: counts, rare events, short
//     runs, trends, batches, streams and T-squared.
//
// Bounds, refused above: 16 rules a chart, windows of 63 points, subgroups of
// factor.MaxSize readings, 64 streams, limits.MaxCharacteristics on a T-squared chart.
// A step costs the same whatever lies behind it, in proportion to the streams of a
// group chart and to the square of the characteristics of a T-squared chart. It
// allocates nothing but for the first sight of a size.
//
// The package knows no clock, no database, no boundaries and no people: whoever
// calls it decides where a fold starts afresh. It fails by error, never by panic
// or by a NaN that looks like a number. It uses the standard library and its two
// sisters limits and factor only.
package watch
