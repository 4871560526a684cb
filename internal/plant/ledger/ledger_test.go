package ledger_test

import (
	"crypto/sha256"
	"encoding/hex"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant/ledger"
)

var (
	chain = uuid.MustParse("0190a5c0-0000-7000-8000-000000000001")
	when  = time.Date(2026, 3, 12, 12, 14, 5, 123_456_789, time.FixedZone("", 3600))
)

// TestEncodingIsFinal pins encoding 1 byte by byte. The digest was computed a second
// time with a few lines of Python and hashlib from the description in the package
// comment. Changing either means a new encoding number, not another expectation.
func TestEncodingIsFinal(t *testing.T) {
	t.Parallel()
	id := uuid.MustParse("0190a5c0-0000-7000-8000-000000000002")
	e, head, err := ledger.Seal(chain, ledger.Head{}, ledger.Matter{Matter: id, Step: "opened", At: ledger.Time(when), Cause: "a < b & é"})
	if err != nil {
		t.Fatal(err)
	}
	const body = `{"matter":"0190a5c0-0000-7000-8000-000000000002","step":"opened","at":"2026-03-12T11:14:05.123456Z","cause":"a < b & é"}`
	if string(e.Body) != body {
		t.Errorf("body = %s\nwant   %s", e.Body, body)
	}
	const hash = "ac16fba3f840bb3dbb3ea1df538214166d8ec9d1300d20aca92c82276242c4f2"
	if got := hex.EncodeToString(e.Hash[:]); got != hash {
		t.Errorf("hash = %s, want %s", got, hash)
	}
	if e.Seq != 1 || head.Seq != 1 || head.Hash != e.Hash {
		t.Errorf("entry %d, head %+v", e.Seq, head)
	}
}

func TestNumbersKeepEveryDigit(t *testing.T) {
	t.Parallel()
	b, err := ledger.Number(third()).MarshalText()
	if err != nil || string(b) != "0.3333333333333333" {
		t.Errorf("number = %s, %v", b, err)
	}
}

func seal(t testing.TB, n int) []ledger.Entry {
	t.Helper()
	var out []ledger.Entry
	var head ledger.Head
	for i := range n {
		e, next, err := ledger.Seal(chain, head, ledger.Subgroup{Version: 1, Readings: []int64{int64(i), 2, 3}, TakenAt: ledger.Time(when)})
		if err != nil {
			t.Fatal(err)
		}
		out, head = append(out, e), next
	}
	return out
}

func verify(entries []ledger.Entry) error {
	v := ledger.Verifier{Chain: chain}
	for _, e := range entries {
		if err := v.Next(e); err != nil {
			return err
		}
	}
	return nil
}

func TestVerifierFindsEveryChange(t *testing.T) {
	t.Parallel()
	if err := verify(seal(t, 5)); err != nil {
		t.Fatal(err)
	}
	for name, change := range map[string]func(es []ledger.Entry) []ledger.Entry{
		"body":     func(es []ledger.Entry) []ledger.Entry { es[2].Body = []byte("{}"); return es },
		"kind":     func(es []ledger.Entry) []ledger.Entry { es[2].Kind = "change"; return es },
		"encoding": func(es []ledger.Entry) []ledger.Entry { es[2].Encoding = 2; return es },
		"hash":     func(es []ledger.Entry) []ledger.Entry { es[2].Hash[0] ^= 1; return es },
		"previous": func(es []ledger.Entry) []ledger.Entry { es[2].Previous[31] ^= 1; return es },
		"missing":  func(es []ledger.Entry) []ledger.Entry { return append(es[:2], es[3:]...) },
		"swapped":  func(es []ledger.Entry) []ledger.Entry { es[1], es[2] = es[2], es[1]; return es },
		"number":   func(es []ledger.Entry) []ledger.Entry { es[4].Seq = 9; return es },
		"chain":    func(es []ledger.Entry) []ledger.Entry { es[3].Chain = uuid.New(); return es },
		"resealed": func(es []ledger.Entry) []ledger.Entry {
			es[2].Body = []byte("{}")
			es[2].Hash = es[2].Digest()
			return es
		},
	} {
		if verify(change(seal(t, 5))) == nil {
			t.Errorf("a changed %s was not found", name)
		}
	}
}

func TestRootDependsOnEveryHead(t *testing.T) {
	t.Parallel()
	a, b := uuid.New(), uuid.New()
	heads := map[uuid.UUID]ledger.Head{a: {Seq: 1, Hash: sha256.Sum256([]byte("a"))}, b: {Seq: 2, Hash: sha256.Sum256([]byte("b"))}}
	root := ledger.Root(heads)
	if ledger.Root(map[uuid.UUID]ledger.Head{b: heads[b], a: heads[a]}) != root {
		t.Error("the root depends on the order")
	}
	heads[b] = ledger.Head{Seq: 3, Hash: heads[b].Hash}
	if ledger.Root(heads) == root {
		t.Error("another head left the root as it was")
	}
}

// FuzzVerifier flips anything in a body and demands that it is found.
func FuzzVerifier(f *testing.F) {
	f.Add([]byte("{}"), 1)
	f.Fuzz(func(t *testing.T, body []byte, at int) {
		es := seal(t, 4)
		i := int(uint(at) % 4)
		if string(body) == string(es[i].Body) {
			return
		}
		es[i].Body = body
		if verify(es) == nil {
			t.Fatalf("body %q at %d was not found", body, i)
		}
	})
}

// third is one third as a float64, computed when the program runs.
func third() float64 { return 1 / float64(len("abc")) }
