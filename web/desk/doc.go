// Package desk is the engineer's surface: the list of characteristics, the control
// chart of one over any stretch of its record, what limits were in force at any
// instant, and the limit study that ends in freezing a revision. Supervisors read
// it; only who may set limits studies and freezes.
//
// It computes nothing that decides anything. Limits and rules are computed by
// plant.Study, shown while subgroups are left out and run again over the record when
// they are frozen; signals and matters come from the record. What is worked out here
// is where to draw them.
//
// All of a study's state stands in its address (studyState), so a page can be
// reloaded, sent to a colleague and gone back to. The secret that signs a revision is
// only ever posted.
package desk
