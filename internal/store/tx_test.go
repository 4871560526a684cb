package store

import (
	"context"
	"testing"
	"time"

	"github.com/jackc/pgx/v5"

	"holdfast/internal/localpg/pgtest"
)

// TestPanicLeavesNoTransactionOpen: a connection that stayed out, or came back with a
// transaction open, would starve a pool of one.
func TestPanicLeavesNoTransactionOpen(t *testing.T) {
	t.Parallel()
	ctx, cancel := context.WithTimeout(context.Background(), 20*time.Second)
	defer cancel()
	s, err := Open(ctx, Options{URL: pgtest.Database(t), MaxConns: 1})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { s.pool.Reset(); s.Close() })
	func() {
		defer func() { _ = recover() }()
		_ = s.inTx(ctx, func(tx pgx.Tx) error {
			if _, err := tx.Exec(ctx, `lock table plant`); err != nil {
				t.Error(err)
			}
			panic("a fault of ours")
		})
	}()
	if s.pool.Stat().AcquiredConns() != 0 {
		t.Fatal("the connection is still out")
	}
	if err := s.inTx(ctx, func(tx pgx.Tx) error {
		_, err := tx.Exec(ctx, `lock table plant`)
		return err
	}); err != nil {
		t.Errorf("the next transaction: %v", err)
	}
}
