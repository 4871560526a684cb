// Package calc is the scriptable face of the statistics: a topic, one JSON object in,
// one JSON object out.
//
// Each topic is a small typed function over the packages of internal/spc; nothing is
// computed here that they do not compute. Input is read strictly: a field that the
// topic does not have, a field given twice, a missing one, a null among numbers, and a
// number that float64 cannot hold are errors. What has no value in an answer (a limit
// that is absent, an index without its specification) is null, and its key is still
// there. No answer holds a NaN or an infinity. Indices count from 0.
//
// Work is bounded: an input has at most MaxBytes, and topics whose cost grows faster
// than their input say what they take. Simulated answers stop at a standard error of
// 1 % or after SimulationTime each, use a fixed seed, and carry their standard error.
package calc

import "time"

const (
	// MaxBytes is the longest input taken.
	MaxBytes = 32 << 20
	// SimulationTime is how long one answer is simulated at most.
	SimulationTime = 2 * time.Second
	// CallTime is how long one call goes on to further shifts of a run length.
	CallTime = 10 * time.Second
	// seed starts the random numbers of every simulated answer.
	seed = 20260217
)
