package demo

import (
	"context"
	"math/rand/v2"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store"
)

// hands do what the people of the works do about one matter, a thing at a time.
type hands struct {
	store                *store.Store
	rng                  *rand.Rand
	track                *track
	day                  float64
	operator, supervisor uuid.UUID

	now  time.Time
	turn func(found fault) error // turns the machine where that is the fix; nil: never
	did  func(found fault) error // records what was done to the machine; nil: not at all
}

func (h hands) minutes(least, most int) time.Duration {
	return time.Duration(least)*time.Minute + time.Duration(h.rng.Float64()*float64(most-least)*float64(time.Minute))
}

// next does the next thing about a matter and returns when somebody comes to it again; 0
// when it is over, or is left to the visitor.
func (h hands) next(ctx context.Context, id uuid.UUID) (time.Duration, error) {
	m, err := h.store.Matter(ctx, id)
	if err != nil || !m.Open() {
		return 0, err
	}
	p := m.Progress()
	switch p.Stage {
	case plant.StageOpen:
		return h.minutes(1, 6), h.store.TakeMatter(ctx, m.ID, m.Version, h.operator)
	case plant.StageWorking:
		if h.track.hasOpenFault(h.day) && p.Next >= len(p.Steps)/2 {
			return 0, nil // it stays open into the visitor's day
		}
		if p.Next < len(p.Steps) {
			return h.minutes(1, 5), h.store.AnswerStep(ctx, h.answer(m, p))
		}
		if len(p.Steps) == 0 && h.rng.IntN(3) > 0 {
			return h.minutes(5, 40), nil // they are looking
		}
	case plant.StageConfirming:
		return h.minutes(6, 15), nil // the round that confirms it comes when it is due
	case plant.StageVerifying:
		return h.minutes(3, 10), h.store.VerifyFix(ctx, plant.VerifyRequest{Matter: m.ID, Version: m.Version, Fix: p.Fix.ID, Accepted: true, Person: h.supervisor})
	}
	req := plant.ClosingRequest{Matter: m.ID, Version: m.Version, Person: h.operator, Cause: "Not found"}
	if p.Stage == plant.StageWorking {
		if found, ok := h.track.find(h.day); ok {
			req.Cause, req.Action = found.cause, found.action
			if found.turn && h.turn != nil {
				if err := h.turn(found); err != nil {
					return 0, err
				}
				req.FixedAt = h.now
			}
			if h.did != nil {
				if err := h.did(found); err != nil {
					return 0, err
				}
			}
		}
	}
	return h.minutes(4, 25), h.store.CloseMatter(ctx, req)
}

// answer is what somebody finds at the machine: the step that asks about what is wrong
// there is the one that is not as it should be.
func (h hands) answer(m plant.Matter, p plant.Progress) plant.StepAnswer {
	w := p.Steps[p.Next]
	a := plant.StepAnswer{ID: id(), Matter: m.ID, Plan: w.Plan, Attempt: p.Attempt, Step: w.Step, Seq: 1, Person: h.operator, Said: plant.SaidDone}
	if w.Answer != nil {
		a.Remedy = true
		return a
	}
	off := h.wrong(w.PlanStep)
	switch w.PlanStep.Kind {
	case plant.StepYesNo:
		if a.Said = plant.SaidYes; off != w.ExpectNo {
			a.Said = plant.SaidNo
		}
	case plant.StepValue:
		a.Said, a.Value = plant.SaidValue, h.reading(w.PlanStep, off)
	}
	return a
}

// wrong reports whether the step asks about the cause that acts.
func (h hands) wrong(s plant.PlanStep) bool {
	text := strings.ToLower(s.Says + " " + s.IfNot)
	for _, i := range h.track.acting(h.day) {
		for word := range strings.FieldsSeq(strings.ToLower(h.track.faults[i].cause)) {
			if len(word) > 3 && strings.Contains(text, strings.Trim(word, ",")) {
				return true
			}
		}
	}
	return false
}

// reading is a value within the step's limits, or a little outside.
func (h hands) reading(s plant.PlanStep, off bool) *plant.Decimal {
	low, high := s.Lower, s.Upper
	switch {
	case low == nil:
		low = &plant.Decimal{Units: high.Units - 5, Decimals: high.Decimals}
	case high == nil:
		high = &plant.Decimal{Units: low.Units + 5, Decimals: low.Decimals}
	}
	v := plant.Decimal{Units: low.Units + h.rng.Int64N(high.Units-low.Units+1), Decimals: low.Decimals}
	if off {
		v.Units = low.Units - 1 - h.rng.Int64N(2)
	}
	return &v
}
