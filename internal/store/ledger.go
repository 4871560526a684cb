package store

import (
	"context"
	"fmt"

	"github.com/google/uuid"
	"github.com/jackc/pgx/v5"

	"holdfast/internal/plant/ledger"
)

const insertLedger = `insert into ledger (chain, seq, plant_id, kind, encoding, body, previous, hash)
	values ($1, $2, $3, $4, $5, $6, $7, $8)`

func (s *Store) queueLedger(b *pgx.Batch, e ledger.Entry) {
	b.Queue(insertLedger, e.Chain, e.Seq, s.plant(), e.Kind, e.Encoding, e.Body, e.Previous[:], e.Hash[:])
}

// appendPlantChain seals body into the plant's own chain. Its head is locked last of
// all that a transaction locks.
func (s *Store) appendPlantChain(ctx context.Context, tx pgx.Tx, bodies ...ledger.Body) error {
	chain := s.plant()
	var head ledger.Head
	var hash []byte
	err := tx.QueryRow(ctx, `select seq, hash from chain_head where chain = $1 for update`, chain).Scan(&head.Seq, &hash)
	if err != nil {
		return fmt.Errorf("lock plant chain: %w", err)
	}
	copy(head.Hash[:], hash)
	b := &pgx.Batch{}
	for _, body := range bodies {
		e, next, err := ledger.Seal(chain, head, body)
		if err != nil {
			return err
		}
		s.queueLedger(b, e)
		head = next
	}
	b.Queue(`update chain_head set seq = $2, hash = $3 where chain = $1`, chain, head.Seq, head.Hash[:])
	if err := tx.SendBatch(ctx, b).Close(); err != nil {
		return fmt.Errorf("append to plant chain: %w", err)
	}
	return nil
}

// Heads returns where every chain stands, as their rows say.
func (s *Store) Heads(ctx context.Context) (map[uuid.UUID]ledger.Head, error) {
	return headsOf(ctx, s.pool)
}

func headsOf(ctx context.Context, q querier) (map[uuid.UUID]ledger.Head, error) {
	rows, err := q.Query(ctx, `select characteristic_id, ledger_seq, ledger_hash from characteristic_state
		union all select chain, seq, hash from chain_head`)
	if err != nil {
		return nil, fmt.Errorf("read ledger heads: %w", err)
	}
	out := make(map[uuid.UUID]ledger.Head)
	var id uuid.UUID
	var h ledger.Head
	var hash []byte
	_, err = pgx.ForEachRow(rows, []any{&id, &h.Seq, &hash}, func() error {
		copy(h.Hash[:], hash)
		out[id] = h
		return nil
	})
	if err != nil {
		return nil, fmt.Errorf("read ledger heads: %w", err)
	}
	return out, nil
}

// Missing lists the chains that do not contain these heads, in the order of their ids:
// they were cut, or written anew from some entry on. A head of length zero is in every
// chain.
func (s *Store) Missing(ctx context.Context, kept map[uuid.UUID]ledger.Head) ([]uuid.UUID, error) {
	var chains []uuid.UUID
	var seqs []int64
	var hashes [][]byte
	for id, h := range kept {
		if h.Seq > 0 {
			chains, seqs, hashes = append(chains, id), append(seqs, h.Seq), append(hashes, h.Hash[:])
		}
	}
	rows, err := s.pool.Query(ctx, `select k.chain from unnest($1::uuid[], $2::bigint[], $3::bytea[]) k (chain, seq, hash)
		left join ledger e on e.chain = k.chain and e.seq = k.seq and e.hash = k.hash
		where e.chain is null order by k.chain`, chains, seqs, hashes)
	if err != nil {
		return nil, fmt.Errorf("look for kept heads: %w", err)
	}
	missing, err := pgx.CollectRows(rows, pgx.RowTo[uuid.UUID])
	if err != nil {
		return nil, fmt.Errorf("look for kept heads: %w", err)
	}
	return missing, nil
}

// VerifyLedger walks every chain from its first entry to its head and returns how
// many entries hold, or the first *ledger.Break.
func (s *Store) VerifyLedger(ctx context.Context) (entries int64, err error) {
	tx, err := s.pool.BeginTx(ctx, pgx.TxOptions{IsoLevel: pgx.RepeatableRead, AccessMode: pgx.ReadOnly})
	if err != nil {
		return 0, fmt.Errorf("begin: %w", err)
	}
	defer func() { _ = tx.Rollback(context.WithoutCancel(ctx)) }()
	heads := make(map[uuid.UUID]ledger.Head)
	rows, err := tx.Query(ctx, `select characteristic_id, ledger_seq, ledger_hash from characteristic_state
		union all select chain, seq, hash from chain_head`)
	if err != nil {
		return 0, fmt.Errorf("read ledger heads: %w", err)
	}
	var id uuid.UUID
	var h ledger.Head
	var hash []byte
	if _, err := pgx.ForEachRow(rows, []any{&id, &h.Seq, &hash}, func() error {
		copy(h.Hash[:], hash)
		heads[id] = h
		return nil
	}); err != nil {
		return 0, fmt.Errorf("read ledger heads: %w", err)
	}
	rows, err = tx.Query(ctx, `select chain, seq, kind, encoding, body, previous, hash from ledger order by chain, seq`)
	if err != nil {
		return 0, fmt.Errorf("read ledger: %w", err)
	}
	var v ledger.Verifier
	var e ledger.Entry
	var previous []byte
	finish := func() error {
		if v.Chain != uuid.Nil && heads[v.Chain] != v.Head {
			return &ledger.Break{Chain: v.Chain, Seq: v.Head.Seq, What: "the chain does not end where its head says"}
		}
		delete(heads, v.Chain)
		return nil
	}
	_, err = pgx.ForEachRow(rows, []any{&e.Chain, &e.Seq, &e.Kind, &e.Encoding, &e.Body, &previous, &hash}, func() error {
		if e.Chain != v.Chain {
			if err := finish(); err != nil {
				return err
			}
			v = ledger.Verifier{Chain: e.Chain}
		}
		copy(e.Previous[:], previous)
		copy(e.Hash[:], hash)
		entries++
		return v.Next(e)
	})
	if err == nil {
		err = finish()
	}
	if err != nil {
		return entries, err
	}
	for chain, head := range heads {
		if head.Seq != 0 {
			return entries, &ledger.Break{Chain: chain, Seq: 1, What: "its entries are missing"}
		}
	}
	return entries, nil
}
