// Package plant is the domain: what a plant has (lines, stations, machines,
// characteristics), what people record there (rounds, changes, matters), and
// what is decided from it (verdict, owner, what is due, where the fold starts
// afresh). It knows the statistics of internal/spc and neither database nor
// HTTP: everything here is a value or a pure function of values, and the time
// is always handed in.
//
// Facts and judgements are kept apart. What people did is fixed when it is
// recorded; what follows from it is derived by one fold (Course, Fold) over the
// finished history, whatever the order in which the records arrived.
//
// A problem that a person can act on is an *Error; everything else that comes
// back is a fault.
package plant
