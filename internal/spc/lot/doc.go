// Package lot decides about lots by samples: the operating characteristic of single,
// double and sequential plans by three models and with inspection error, the smallest
// plan for two risks, the quality and the inspection that screening rejected lots
// brings, the plan of least total inspection, and the switching between normal,
// tightened and reduced inspection.
//
// A plan protects against bad lots only as far as its curve says; an acceptance number
// above zero knowingly accepts lots in which nonconforming units were found, which some
// customers forbid (Plan.AcceptsFound).
//
// Fractions are from 0 to 1. Input without an answer is an error wrapping ErrInput
// that names the argument and the reason; no function returns NaN or an infinity
// without an error.
package lot

import (
	"errors"
	"fmt"
	"math"
)

// ErrInput marks input for which there is no answer; the message names the argument.
var ErrInput = errors.New("lot sampling")

// ErrNoPlan marks risks that no plan within the bounds keeps.
var ErrNoPlan = errors.New("no such sampling plan")

const (
	// MaxSample is the largest sample of a plan.
	MaxSample = 1_000_000
	// MaxLot is the largest lot.
	MaxLot = 1_000_000_000
	// MaxErrorSample is the largest sample for which inspection error is taken
	// through the hypergeometric model, whose sums grow with it.
	MaxErrorSample = 2_000
)

func invalid(format string, args ...any) error {
	return fmt.Errorf("%w: "+format, append([]any{ErrInput}, args...)...)
}

func fractionOK(name string, p float64) error {
	if !(p >= 0 && p <= 1) {
		return invalid("%s must be from 0 to 1, got %g", name, p)
	}
	return nil
}

// Model names the law of the number of nonconforming units found.
type Model string

const (
	// Binomial is exact for samples from a process or an endless lot.
	Binomial Model = "binomial"
	// Poisson is its approximation for small fractions, and exact for
	// nonconformities per unit.
	Poisson Model = "poisson"
	// Hypergeometric is exact for a lot of known size, which holds the nearest whole
	// number of nonconforming units.
	Hypergeometric Model = "hypergeometric"
)

// Errors are the rates of wrong judgement of the inspection; the zero value inspects
// without error. They come from a study of the appraisers.
type Errors struct {
	FalseReject float64 // of conforming units
	Miss        float64 // of nonconforming units
}

func (e Errors) none() bool { return e == Errors{} }

func (e Errors) check() error {
	if err := fractionOK("the rate of false rejects", e.FalseReject); err != nil {
		return err
	}
	if err := fractionOK("the rate of misses", e.Miss); err != nil {
		return err
	}
	if e.FalseReject+e.Miss >= 1 {
		return invalid("with a rate of false rejects of %g and of misses of %g, inspection rejects good units at least as often as bad ones", e.FalseReject, e.Miss)
	}
	return nil
}

// Apparent is the fraction that the inspection sees when the true one is p:
// p(1-miss) + (1-p) falseReject.
//
// Source: Collins, Case and Bennett, AIIE Transactions 5 (1973) (from memory).
func (e Errors) Apparent(p float64) float64 {
	return p*(1-e.Miss) + (1-p)*e.FalseReject
}

// nonconforming is how many units of a lot do not conform at a fraction p.
func nonconforming(lot int, p float64) int { return int(math.Round(float64(lot) * p)) }
