package store

import (
	"bytes"
	"context"
	"fmt"
	"maps"
	"slices"
	"time"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant"
	"holdfast/internal/plant/ledger"
)

// KeepRoot makes the root of this day of the plant, unless there is one. Several servers
// may ask at once: one of them makes it.
func (s *Store) KeepRoot(ctx context.Context) error {
	p, err := s.Plant(ctx)
	if err != nil {
		return err
	}
	now := s.now()
	day := now.In(p.Location).Format(time.DateOnly)
	if known, err := s.rootOn(ctx, day); err != nil || known != nil {
		return err
	}
	ctx, cancel := s.saving(ctx)
	defer cancel()
	return s.inTx(ctx, func(tx pgx.Tx) error {
		// The plant's chain is locked first here, which is all that this transaction locks: of
		// two servers the second finds the root that the first has made.
		if _, err := tx.Exec(ctx, `select from chain_head where chain = $1 for update`, s.plant()); err != nil {
			return fmt.Errorf("lock plant chain: %w", err)
		}
		heads, err := headsOf(ctx, tx)
		if err != nil {
			return err
		}
		ids := slices.SortedFunc(maps.Keys(heads), func(a, b uuid.UUID) int { return bytes.Compare(a[:], b[:]) })
		seqs, hashes := make([]int64, len(ids)), make([][]byte, len(ids))
		for i, id := range ids {
			h := heads[id]
			seqs[i], hashes[i] = h.Seq, h.Hash[:]
		}
		root := ledger.Root(heads)
		made, err := tx.Exec(ctx, `insert into daily_root (plant_id, day, at, chains, seqs, hashes, root) values ($1, $2, $3, $4, $5, $6, $7)
			on conflict do nothing`, s.plant(), day, now, ids, seqs, hashes, root[:])
		if err != nil {
			return fmt.Errorf("keep the root of the day: %w", err)
		}
		if made.RowsAffected() == 0 {
			return nil
		}
		return s.appendPlantChain(ctx, tx, ledger.DailyRoot{Day: day, At: ledger.Time(now), Chains: len(ids), Root: fmt.Sprintf("%x", root)})
	})
}

// RootOn reads the root of a day of the plant, the newest one that is not later than day.
// It is nil where there is none.
func (s *Store) RootOn(ctx context.Context, day string) (*plant.DailyRoot, error) {
	return s.readRoot(ctx, `day <= $2::date`, day)
}

func (s *Store) rootOn(ctx context.Context, day string) (*plant.DailyRoot, error) {
	return s.readRoot(ctx, `day = $2::date`, day)
}

func (s *Store) readRoot(ctx context.Context, which, day string) (*plant.DailyRoot, error) {
	rows, err := s.pool.Query(ctx, `select to_char(day, 'YYYY-MM-DD'), at, cardinality(chains), root from daily_root
		where plant_id = $1 and `+which+` order by day desc limit 1`, s.plant(), day)
	if err != nil {
		return nil, fmt.Errorf("read the root of the day: %w", err)
	}
	list, err := pgx.CollectRows(rows, func(r pgx.CollectableRow) (d plant.DailyRoot, err error) {
		var root []byte
		err = r.Scan(&d.Day, &d.At, &d.Chains, &root)
		copy(d.Root[:], root)
		return d, err
	})
	if err != nil || len(list) == 0 {
		return nil, wrapped("read the root of the day", err)
	}
	return &list[0], nil
}
