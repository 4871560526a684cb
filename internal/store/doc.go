// Package store keeps the plant's record in Postgres through pgx. It is the only
// package that knows SQL: one file a concept, each statement beside its method.
//
// # The write path
//
// A round is one transaction in two batches. The first begins it, locks the state
// rows of its characteristics (in the order of their ids) and reads what is needed
// to judge; the fold runs in Go; the second writes facts, judgements, ledger
// entries and the new state and commits. The lock and what is read under it are
// separate statements on purpose: a statement that also took the lock would read
// with a snapshot older than the lock. Announcing the change happens after the
// commit and outside the transaction, since a NOTIFY inside would make commits
// queue behind one another.
//
// Lock order: state rows by id, then the plant's chain head, last.
//
// # Judging again
//
// What arrives out of order, corrects, voids, or moves a boundary changes the past.
// refold runs the old and the new course of things side by side from the last
// checkpoint before the change until both folds are in the same state again, which
// windows of finite length guarantee soon; it never runs through all history.
package store
