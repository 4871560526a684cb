package store

import (
	"context"
	"fmt"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// putOut writes messages into the outbox, in the transaction of what they tell of.
func (s *Store) putOut(ctx context.Context, tx pgx.Tx, step uuid.UUID, messages []plant.Message, now time.Time, giveUp time.Duration) error {
	b := &pgx.Batch{}
	for _, m := range messages {
		b.Queue(`insert into outbox (id, plant_id, step_id, target, title, body, created_at, next_at, give_up_at)
			values ($1, $2, $3, $4, $5, $6, $7, $7, $8)`, newID(), s.plant(), step, m.Target, m.Title, m.Body, now, now.Add(giveUp))
	}
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("write outbox: %w", err)
	}
	return nil
}

// claim takes what is due for targets that are not paused. The rows are held by a claim
// with an end and not by a transaction: who dies over one loses it to another server.
const claim = `update outbox o set claim = $4, attempts = attempts + 1, tried_at = $2, next_at = $5
	where o.id in (select w.id from outbox w left join outbox_target t on t.plant_id = w.plant_id and t.target = w.target
		where w.plant_id = $1 and w.delivered_at is null and w.given_up_at is null and w.next_at <= $2 and w.target = $3
			and (t.paused_until is null or t.paused_until <= $2)
		order by w.next_at, w.id limit $6 for update of w skip locked)
	returning o.id, o.target, o.title, o.body, o.claim, o.created_at, o.attempts`

// ClaimMessages takes up to so many messages for a target that are due, for as long as
// lease. Other servers pass them over until then.
func (s *Store) ClaimMessages(ctx context.Context, target string, most int, lease time.Duration) ([]plant.Outgoing, error) {
	now := s.now()
	rows, err := s.pool.Query(ctx, claim, s.plant(), now, target, newID(), now.Add(lease), most)
	if err != nil {
		return nil, fmt.Errorf("claim messages: %w", err)
	}
	out, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (m plant.Outgoing, err error) {
		return m, r.Scan(&m.ID, &m.Target, &m.Title, &m.Body, &m.Claim, &m.CreatedAt, &m.Attempts)
	})
	if err != nil {
		return nil, fmt.Errorf("claim messages: %w", err)
	}
	return out, nil
}

// MessageDelivered notes that the target has a message. What was claimed by another
// meanwhile counts as delivered too: it was.
func (s *Store) MessageDelivered(ctx context.Context, m plant.Outgoing) error {
	now := s.now()
	return s.inTx(ctx, func(tx pgx.Tx) error {
		b := &pgx.Batch{}
		b.Queue(`update outbox set delivered_at = $2, given_up_at = null, last_error = '', claim = null where id = $1 and delivered_at is null`, m.ID, now)
		b.Queue(`insert into outbox_target (plant_id, target, last_ok) values ($1, $2, $3)
			on conflict (plant_id, target) do update set failures = 0, paused_until = null, last_ok = $3`, s.plant(), m.Target, now)
		if err := tx.SendBatch(ctx, b).Close(); err != nil {
			return fmt.Errorf("note a delivery: %w", err)
		}
		return nil
	})
}

// MessageFailed notes a failed attempt, in plain words, and when the next one may be. With
// pause the target is left alone until then, whatever waits for it; with giveUp there is
// no next one. It reports whether the message was given up, which happens as well when
// its time is over. An attempt whose claim is lost changes nothing.
func (s *Store) MessageFailed(ctx context.Context, m plant.Outgoing, why string, next time.Time, pause, giveUp bool) (gaveUp bool, err error) {
	now := s.now()
	err = s.inTx(ctx, func(tx pgx.Tx) error {
		rows, err := tx.Query(ctx, `update outbox set last_error = $3, next_at = $4, claim = null,
				given_up_at = case when $5 or give_up_at <= $4 then $6::timestamptz end
			where id = $1 and claim = $2 and delivered_at is null returning given_up_at is not null`, m.ID, m.Claim, why, next, giveUp, now)
		if err != nil {
			return fmt.Errorf("note a failure: %w", err)
		}
		list, err := pgx.CollectRows(rows, pgx.RowTo[bool])
		if err != nil {
			return fmt.Errorf("note a failure: %w", err)
		}
		if len(list) == 0 {
			return nil
		}
		gaveUp = list[0]
		var until *time.Time
		if pause {
			until = &next
		}
		_, err = tx.Exec(ctx, `insert into outbox_target (plant_id, target, failures, paused_until, last_error, failed_at) values ($1, $2, 1, $3, $4, $5)
			on conflict (plant_id, target) do update set failures = outbox_target.failures + 1, last_error = $4, failed_at = $5,
				paused_until = coalesce($3, outbox_target.paused_until)`, s.plant(), m.Target, until, why, now)
		if err != nil {
			return fmt.Errorf("note how a target stands: %w", err)
		}
		return nil
	})
	return gaveUp, err
}

// TargetFailures is how often a target has failed in a row.
func (s *Store) TargetFailures(ctx context.Context, target string) (n int, err error) {
	err = s.pool.QueryRow(ctx, `select coalesce(max(failures), 0) from outbox_target where plant_id = $1 and target = $2`, s.plant(), target).Scan(&n)
	if err != nil {
		return 0, fmt.Errorf("read how a target stands: %w", err)
	}
	return n, nil
}

// GiveUpExpired gives up what waits beyond its time: messages to a target that no server
// has in its configuration any more, or that is paused for longer than that.
func (s *Store) GiveUpExpired(ctx context.Context, why string) (int, error) {
	tag, err := s.pool.Exec(ctx, `update outbox set given_up_at = $2, claim = null, last_error = case when last_error = '' then $3 else last_error end
		where plant_id = $1 and delivered_at is null and given_up_at is null and give_up_at <= $2 and next_at <= $2`, s.plant(), s.now(), why)
	if err != nil {
		return 0, fmt.Errorf("give up messages: %w", err)
	}
	return int(tag.RowsAffected()), nil
}

// SendAgain puts a message that was given up back on its way, under its id.
func (s *Store) SendAgain(ctx context.Context, id, person uuid.UUID) error {
	set, err := s.Settings(ctx)
	if err != nil {
		return err
	}
	return s.inTx(ctx, func(tx pgx.Tx) error {
		now := s.now()
		var target string
		err := tx.QueryRow(ctx, `update outbox set given_up_at = null, next_at = $3, give_up_at = $4
			where id = $1 and plant_id = $2 and given_up_at is not null returning target`, id, s.plant(), now, now.Add(set.Escalation.GiveUp())).Scan(&target)
		if err != nil {
			return missing(err, "This message is not waiting to be sent again.")
		}
		// Who asks for it wants it tried now.
		if _, err := tx.Exec(ctx, `update outbox_target set paused_until = null where plant_id = $1 and target = $2`, s.plant(), target); err != nil {
			return fmt.Errorf("send again: %w", err)
		}
		return s.appendPlantChain(ctx, tx, ledger.Arrangement{What: "message sent again", Subject: id, At: ledger.Time(now),
			Person: ledger.ID(person), Content: map[string]any{"target": target}})
	})
}

// Undelivered lists what could not be delivered, newest first.
func (s *Store) Undelivered(ctx context.Context, most int) ([]plant.Undelivered, error) {
	rows, err := s.pool.Query(ctx, `select id, target, title, created_at, given_up_at, attempts, last_error from outbox
		where plant_id = $1 and given_up_at is not null order by given_up_at desc, id desc limit $2`, s.plant(), most)
	if err != nil {
		return nil, fmt.Errorf("read what could not be delivered: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (u plant.Undelivered, err error) {
		return u, r.Scan(&u.ID, &u.Target, &u.Title, &u.CreatedAt, &u.GivenUpAt, &u.Attempts, &u.LastError)
	})
}

// TargetStates tells how it stands with every target that anything was ever sent to, by
// name.
func (s *Store) TargetStates(ctx context.Context) ([]plant.TargetState, error) {
	rows, err := s.pool.Query(ctx, `with waiting as (select target, count(*)::int as n from outbox
			where plant_id = $1 and delivered_at is null and given_up_at is null group by target)
		select coalesce(t.target, w.target), coalesce(w.n, 0), coalesce(t.failures, 0), t.paused_until, t.last_ok, t.failed_at, coalesce(t.last_error, '')
		from (select * from outbox_target where plant_id = $1) t full join waiting w on w.target = t.target order by 1`, s.plant())
	if err != nil {
		return nil, fmt.Errorf("read how targets stand: %w", err)
	}
	return pgx.CollectRows(rows, func(r pgx.CollectableRow) (t plant.TargetState, err error) {
		var paused, ok, failed *time.Time
		err = r.Scan(&t.Target, &t.Waiting, &t.Failures, &paused, &ok, &failed, &t.LastError)
		t.PausedUntil, t.LastOK, t.FailedAt = orZero(paused), orZero(ok), orZero(failed)
		return t, err
	})
}

// OutboxState counts what waits to leave the box and what was given up, for metrics.
func (s *Store) OutboxState(ctx context.Context) (plant.OutboxState, error) {
	var o plant.OutboxState
	var oldest *time.Time
	err := s.pool.QueryRow(ctx, `select count(*) filter (where given_up_at is null)::int, min(created_at) filter (where given_up_at is null),
			count(*) filter (where given_up_at is not null)::int
		from outbox where plant_id = $1 and delivered_at is null`, s.plant()).Scan(&o.Waiting, &oldest, &o.GivenUp)
	if err != nil {
		return o, fmt.Errorf("read outbox: %w", err)
	}
	o.Oldest = orZero(oldest)
	return o, nil
}
