package store

import (
	"context"
	"errors"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// WriteNote records a note for the shifts that follow. The same note sent again is no error;
// the same id with another text is a Conflict.
func (s *Store) WriteNote(ctx context.Context, n plant.ShiftNote) error {
	var err error
	if n.Text, err = plant.CleanTextWithin("text", n.Text, plant.MaxNote); err != nil {
		return err
	}
	if n.Text == "" {
		return plant.Invalidf("text", "Write what the next shift must know.")
	}
	ctx, cancel := s.saving(ctx)
	defer cancel()
	digest := n.Digest()
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		now := s.now()
		made, err := tx.Exec(ctx, `insert into shift_note (id, plant_id, line_id, text, at, person_id, digest)
			select $1, l.plant_id, l.id, $3, $4, $5, $6 from line l where l.id = $2 and l.plant_id = $7`,
			n.ID, n.Line, n.Text, now, n.WrittenByID, digest[:], s.plant())
		if err != nil {
			return fmt.Errorf("write a note: %w", err)
		}
		if made.RowsAffected() == 0 {
			return plant.NotFoundf("", "There is no such line.")
		}
		return s.appendPlantChain(ctx, tx, ledger.ShiftNote{Note: n.ID, Line: n.Line, Step: "written", Text: n.Text, At: ledger.Time(now), Person: n.WrittenByID})
	})
	if !violates(err, "shift_note_pkey") {
		return err
	}
	var same bool
	if err := s.pool.QueryRow(ctx, `select digest = $2 from shift_note where id = $1`, n.ID, digest[:]).Scan(&same); err != nil {
		return fmt.Errorf("read the note that is there: %w", err)
	}
	if !same {
		return plant.Conflictf("", "Another note is on record under this number.")
	}
	return nil
}

// ClearNote ends the carrying of a note.
func (s *Store) ClearNote(ctx context.Context, note, person uuid.UUID) error {
	ctx, cancel := s.saving(ctx)
	defer cancel()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		var line uuid.UUID
		if err := tx.QueryRow(ctx, `select line_id from shift_note where id = $1 and plant_id = $2`, note, s.plant()).Scan(&line); err != nil {
			if errors.Is(err, pgx.ErrNoRows) {
				return plant.NotFoundf("", "There is no such note.")
			}
			return fmt.Errorf("read a note: %w", err)
		}
		now := s.now()
		if _, err := tx.Exec(ctx, `insert into shift_note_cleared (note_id, plant_id, at, person_id) values ($1, $2, $3, $4)`, note, s.plant(), now, person); err != nil {
			return fmt.Errorf("clear a note: %w", err)
		}
		return s.appendPlantChain(ctx, tx, ledger.ShiftNote{Note: note, Line: line, Step: "cleared", At: ledger.Time(now), Person: person})
	})
	if violates(err, "shift_note_cleared_pkey") {
		return plant.Conflictf("", "Somebody has cleared this note already.")
	}
	return err
}

// ConfirmHandover records that somebody has read what a shift that is over handed over on a
// line. A second time changes nothing.
func (s *Store) ConfirmHandover(ctx context.Context, line uuid.UUID, span plant.ShiftSpan, person uuid.UUID) error {
	now := s.now()
	if !span.Over(now) {
		return plant.Invalidf("", "This shift is not over yet. Confirm its handover when it is.")
	}
	ctx, cancel := s.saving(ctx)
	defer cancel()
	err := s.inTx(ctx, func(tx pgx.Tx) error {
		made, err := tx.Exec(ctx, `insert into handover_read (plant_id, line_id, shift_from, person_id, at)
			select l.plant_id, l.id, $3, $4, $5 from line l where l.id = $2 and l.plant_id = $1`, s.plant(), line, span.From, person, now)
		if err != nil {
			return fmt.Errorf("confirm a handover: %w", err)
		}
		if made.RowsAffected() == 0 {
			return plant.NotFoundf("", "There is no such line.")
		}
		return s.appendPlantChain(ctx, tx, ledger.HandoverRead{Line: line, ShiftFrom: ledger.Time(span.From), At: ledger.Time(now), Person: person})
	})
	if violates(err, "handover_read_pkey") {
		return nil
	}
	return err
}
