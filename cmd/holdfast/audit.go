package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/hex"
	"fmt"
	"log/slog"
	"maps"
	"os"
	"slices"
	"strings"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant/ledger"
	"holdfast/internal/store"
)

type auditCmd struct {
	database
	Judgements bool   `help:"Also judge the whole record anew and compare with what is stored."`
	Heads      bool   `help:"Only print where every chain stands, to be kept elsewhere; verify nothing."`
	Against    string `help:"Also demand that the chains contain the heads that --heads printed into this file." placeholder:"FILE"`
}

// Run only reads, so that it also works beside the server that writes.
func (c *auditCmd) Run(ctx context.Context, log *slog.Logger) error {
	if c.Heads {
		return c.beside(ctx, log, func(st *store.Store) error { return printHeads(ctx, st) })
	}
	var kept map[uuid.UUID]ledger.Head
	if c.Against != "" {
		var err error
		if kept, err = readHeads(c.Against); err != nil {
			return err
		}
	}
	return c.beside(ctx, log, func(st *store.Store) error {
		n, err := st.VerifyLedger(ctx)
		if err != nil {
			return fmt.Errorf("after %d entries that hold: %w", n, err)
		}
		heads, err := st.Heads(ctx)
		if err != nil {
			return err
		}
		fmt.Printf("%d entries in %d chains hold.\nRoot over all heads: %x\n", n, len(heads), rootOf(heads))
		if kept == nil {
			fmt.Println("Compare it with heads that were kept outside this machine (--heads, --against): a chain shows tampering only against those.")
		} else {
			missing, err := st.Missing(ctx, kept)
			if err != nil {
				return err
			}
			for _, id := range missing {
				fmt.Printf("%s: does not contain entry %d as it was kept\n", id, kept[id].Seq)
			}
			if len(missing) > 0 {
				return fmt.Errorf("%d of %d chains were cut or written anew since %s", len(missing), len(kept), c.Against)
			}
			fmt.Printf("All %d heads of %s are contained.\n", len(kept), c.Against)
		}
		differ, err := st.CheckRecord(ctx)
		if err != nil {
			return err
		}
		said := "What is on record is what was sealed."
		if c.Judgements {
			subgroups, judged, err := st.CheckJudgements(ctx)
			if err != nil {
				return err
			}
			differ = append(differ, judged...)
			said += fmt.Sprintf("\n%d subgroups judged anew give the judgements on record.", subgroups)
		}
		for _, d := range differ {
			fmt.Printf("%s: %s\n", d.Characteristic, d.What)
		}
		if len(differ) > 0 {
			return fmt.Errorf("the record differs in %d places from what was sealed or follows from it", len(differ))
		}
		fmt.Println(said)
		return nil
	})
}

// printHeads prints where every chain stands: a line a chain, and first, as a remark, the
// time and the root over all.
func printHeads(ctx context.Context, st *store.Store) error {
	heads, err := st.Heads(ctx)
	if err != nil {
		return err
	}
	fmt.Printf("# %s, %d chains, root %x\n", time.Now().UTC().Format(time.RFC3339), len(heads), rootOf(heads))
	ids := slices.SortedFunc(maps.Keys(heads), func(a, b uuid.UUID) int { return bytes.Compare(a[:], b[:]) })
	for _, id := range ids {
		fmt.Printf("%s %d %x\n", id, heads[id].Seq, heads[id].Hash)
	}
	return nil
}

// readHeads reads what printHeads printed.
func readHeads(path string) (map[uuid.UUID]ledger.Head, error) {
	f, err := os.Open(path)
	if err != nil {
		return nil, fmt.Errorf("read kept heads: %w", err)
	}
	defer f.Close()
	out := map[uuid.UUID]ledger.Head{}
	lines := bufio.NewScanner(f)
	for n := 1; lines.Scan(); n++ {
		line := strings.TrimSpace(lines.Text())
		if line == "" || strings.HasPrefix(line, "#") {
			continue
		}
		var id, hash string
		var h ledger.Head
		if _, err := fmt.Sscanf(line, "%s %d %s", &id, &h.Seq, &hash); err != nil {
			return nil, fmt.Errorf("%s, line %d: not a chain, its length and its hash", path, n)
		}
		chain, err := uuid.Parse(id)
		raw, hexErr := hex.DecodeString(hash)
		if err != nil || hexErr != nil || len(raw) != ledger.Size || h.Seq < 0 {
			return nil, fmt.Errorf("%s, line %d: not a chain, its length and its hash", path, n)
		}
		copy(h.Hash[:], raw)
		out[chain] = h
	}
	if err := lines.Err(); err != nil {
		return nil, fmt.Errorf("read kept heads: %w", err)
	}
	if len(out) == 0 {
		return nil, fmt.Errorf("%s holds no heads", path)
	}
	return out, nil
}
