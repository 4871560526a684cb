package store

import (
	"bytes"
	"context"
	"crypto/sha256"
	"errors"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// AnswerStep records an answer to a step of the plans that a matter walks. The same
// answer sent again writes nothing; another under its id, or one to a step that
// somebody else has answered meanwhile, is a Conflict.
func (s *Store) AnswerStep(ctx context.Context, a plant.StepAnswer) error {
	var err error
	if a.Note, err = plant.CleanTextWithin("note", a.Note, 200); err != nil {
		return err
	}
	digest := answerDigest(a)
	if known, err := s.answered(ctx, a.ID, digest); known || err != nil {
		return err
	}
	err = s.onMatter(ctx, a.Matter, anyVersion, func(tx pgx.Tx, l *locked, m *plant.Matter) error {
		a, err := m.CheckAnswer(a, s.now())
		if err != nil {
			return err
		}
		b := &pgx.Batch{}
		b.Queue(`insert into matter_answer (id, plant_id, matter_id, plan_id, attempt, step, remedy, seq, said, value, note, at, person_id, digest)
			values ($1, $2, $3, $4, $5, $6, $7, $8, $9, $10::text::numeric, $11, $12, $13, $14)`,
			a.ID, s.plant(), a.Matter, a.Plan, a.Attempt, a.Step, a.Remedy, a.Seq, string(a.Said), decimalOrNull(a.Value), a.Note, a.At, a.Person, digest)
		if err := s.seal(b, l, answerBody(a)); err != nil {
			return err
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
	if err == nil {
		return nil
	}
	// The same send may have come twice at once: the later of the two finds the first.
	if known, again := s.answered(ctx, a.ID, digest); known || again != nil {
		return again
	}
	return fmt.Errorf("answer step: %w", err)
}

func answerDigest(a plant.StepAnswer) []byte {
	value := ""
	if a.Value != nil {
		value = a.Value.String()
	}
	sum := sha256.Sum256(fmt.Appendf(nil, "%s/%s/%d/%d/%t/%d/%s/%s/%s/%q", a.Matter, a.Plan, a.Attempt, a.Step, a.Remedy, a.Seq, a.Person, a.Said, value, a.Note))
	return sum[:]
}

// answered reports whether the answer is on record. Another under its id is a Conflict.
func (s *Store) answered(ctx context.Context, id uuid.UUID, digest []byte) (bool, error) {
	var have []byte
	err := s.pool.QueryRow(ctx, `select digest from matter_answer where id = $1`, id).Scan(&have)
	switch {
	case errors.Is(err, pgx.ErrNoRows):
		return false, nil
	case err != nil:
		return false, fmt.Errorf("look for the answer: %w", err)
	case !bytes.Equal(have, digest):
		return true, plant.Conflictf("", "Another answer is on record under this number. Look at how it stands now.")
	}
	return true, nil
}

func answerBody(a plant.StepAnswer) ledger.MatterAnswer {
	body := ledger.MatterAnswer{Answer: a.ID, Matter: a.Matter, Plan: a.Plan, Attempt: a.Attempt, Step: a.Step, Remedy: a.Remedy, Seq: a.Seq,
		Said: string(a.Said), Note: a.Note, At: ledger.Time(a.At), Person: a.Person}
	if a.Value != nil {
		body.Value = a.Value.String()
	}
	return body
}

// VerifyFix records a second person's word on the fix that stands, signed. Accepted it
// ends the matter; refused the matter goes on, and its plans are walked again.
func (s *Store) VerifyFix(ctx context.Context, v plant.VerifyRequest) error {
	var err error
	if v.Note, err = plant.CleanTextWithin("note", v.Note, 300); err != nil {
		return err
	}
	return s.onMatter(ctx, v.Matter, v.Version, func(tx pgx.Tx, l *locked, m *plant.Matter) error {
		closing, err := m.CheckVerify(v)
		if err != nil {
			return err
		}
		meaning := "verify"
		if !v.Accepted {
			meaning = "refuse"
		}
		signature, err := s.signature(ctx, tx, v.Person, meaning)
		if err != nil {
			return err
		}
		now, id := s.now(), newID()
		b := &pgx.Batch{}
		b.Queue(`insert into matter_verification (id, plant_id, matter_id, fix_id, accepted, note, at, person_id) values ($1, $2, $3, $4, $5, $6, $7, $8)`,
			id, s.plant(), m.ID, v.Fix, v.Accepted, v.Note, now, v.Person)
		if err := s.seal(b, l, ledger.MatterVerification{Verification: id, Matter: m.ID, Fix: v.Fix, Accepted: v.Accepted, Note: v.Note,
			At: ledger.Time(now), Signature: signature}); err != nil {
			return err
		}
		if v.Accepted {
			if err := s.endMatter(ctx, tx, b, l, m, m.Progress().Fix, closing, v.Person, now); err != nil {
				return err
			}
		} else {
			b.Queue(`update matter set version = version + 1 where id = $1`, m.ID)
		}
		s.save(b, l)
		return tx.SendBatch(ctx, b).Close()
	})
}
