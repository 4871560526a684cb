package auth

import (
	"context"
	"errors"
	"math/rand/v2"
	"strings"
	"sync"
	"testing"
)

// quick is real argon2id at a cost for tests that are not about cost.
var quick = Cost{Time: 1, MemoryKiB: 64, Threads: 1}

func quickHasher(t testing.TB) *Hasher {
	t.Helper()
	h, err := NewHasher(quick, 4)
	if err != nil {
		t.Fatal(err)
	}
	return h
}

// The encoded hashes are test vectors of the reference implementation,
// P-H-C/phc-winner-argon2, src/test.c, version 0x13, argon2id.
func TestVerifyAgreesWithTheReferenceImplementation(t *testing.T) {
	t.Parallel()
	h := quickHasher(t)
	for stored, secret := range map[string]Secret{
		"$argon2id$v=19$m=65536,t=1,p=1$c29tZXNhbHQ$9qWtwbpyPd3vm1rB1GThgPzZ3/ydHL92zKL+15XZypg": "password",
		"$argon2id$v=19$m=256,t=2,p=1$c29tZXNhbHQ$nf65EOgLrQMR/uIPnA4rEsF5h7TKyQwu9U1bMCHGi/4":   "password",
		"$argon2id$v=19$m=256,t=2,p=2$c29tZXNhbHQ$bQk8UB/VmZZF4Oo79iDXuL5/0ttZwg2f/5U52iv1cDc":   "password",
	} {
		if ok, err := h.Verify(t.Context(), stored, secret); !ok || err != nil {
			t.Errorf("Verify(%s) = %v, %v; want true", stored, ok, err)
		}
		if ok, err := h.Verify(t.Context(), stored, secret+"x"); ok || err != nil {
			t.Errorf("Verify of another secret = %v, %v; want false", ok, err)
		}
		if !h.NeedsRehash(stored) {
			t.Error("a hash of another cost needs no renewal")
		}
	}
}

func TestDefaultCostHashesAndVerifies(t *testing.T) {
	t.Parallel()
	h, err := NewHasher(DefaultCost, 1)
	if err != nil {
		t.Fatal(err)
	}
	stored, err := h.Hash(t.Context(), "seven lazy herons")
	if err != nil {
		t.Fatal(err)
	}
	if !strings.HasPrefix(stored, "$argon2id$v=19$m=65536,t=3,p=4$") {
		t.Errorf("stored = %s", stored)
	}
	if ok, err := h.Verify(t.Context(), stored, "seven lazy herons"); !ok || err != nil {
		t.Errorf("Verify = %v, %v", ok, err)
	}
	if h.NeedsRehash(stored) {
		t.Error("a fresh hash needs renewal")
	}
}

// TestVerifyHoldsForWhatWasHashedAndNothingElse tries random secrets of any
// characters, each against its own hash and against those of close others.
func TestVerifyHoldsForWhatWasHashedAndNothingElse(t *testing.T) {
	t.Parallel()
	h := quickHasher(t)
	rng := rand.New(rand.NewPCG(1, 2))
	for range 200 {
		runes := make([]rune, 1+rng.IntN(MaxLength))
		for i := range runes {
			runes[i] = []rune("aAzZ09 -_$,=ßéжλ中😀")[rng.IntN(18)]
		}
		s := Secret(runes)
		a, errA := h.Hash(t.Context(), s)
		b, errB := h.Hash(t.Context(), s)
		if errA != nil || errB != nil || a == b {
			t.Fatalf("hashes %q, %q of one secret, errors %v, %v; want two different ones", a, b, errA, errB)
		}
		if ok, err := h.Verify(t.Context(), a, s); !ok || err != nil {
			t.Errorf("own secret: %v, %v", ok, err)
		}
		changed := append([]rune(nil), runes...)
		changed[rng.IntN(len(changed))] = 'q'
		for _, other := range []Secret{Secret(changed), Secret(runes[1:]), s + "a", Secret(strings.ToUpper(string(runes))) + "b", ""} {
			if ok, _ := h.Verify(t.Context(), a, other); ok {
				t.Errorf("%q opens what %q closed", string(other), string(s))
			}
		}
		if ok, err := h.Verify(t.Context(), "", s); ok || err != nil {
			t.Errorf("unknown login: %v, %v; want false", ok, err)
		}
	}
}

func TestTheSameCharactersFromAnotherKeyboardAreTheSameSecret(t *testing.T) {
	t.Parallel()
	h := quickHasher(t)
	stored, err := h.Hash(t.Context(), "caf\u00e9 number 12 34") // é as one character
	if err != nil {
		t.Fatal(err)
	}
	for _, typed := range []Secret{"cafe\u0301 number 12 34", "caf\u00e9 number \uff11\uff12 34"} { // e and accent; full width digits
		if ok, err := h.Verify(t.Context(), stored, typed); !ok || err != nil {
			t.Errorf("Verify(%q) = %v, %v", string(typed), ok, err)
		}
	}
}

func TestTooLongSecretsAreNeverCut(t *testing.T) {
	t.Parallel()
	h := quickHasher(t)
	full := Secret(longText(MaxLength))
	stored, err := h.Hash(t.Context(), full)
	if err != nil {
		t.Fatal(err)
	}
	if ok, err := h.Verify(t.Context(), stored, full+"x"); ok || err != nil {
		t.Errorf("one character more: %v, %v; want false", ok, err)
	}
	if _, err := h.Hash(t.Context(), full+"x"); err == nil {
		t.Error("a secret that is too long was hashed")
	}
}

func TestDamagedHashesAreRefusedWithoutWork(t *testing.T) {
	t.Parallel()
	h := quickHasher(t)
	good, err := h.Hash(t.Context(), "x")
	if err != nil {
		t.Fatal(err)
	}
	parts := strings.Split(good, "$")
	join := func(p ...string) string { return strings.Join(p, "$") }
	for name, stored := range map[string]string{
		"other algorithm": strings.Replace(good, "argon2id", "argon2i", 1),
		"other version":   strings.Replace(good, "v=19", "v=16", 1),
		"all memory":      strings.Replace(good, "m=64", "m=4294967295", 1),
		"endless":         strings.Replace(good, "t=1", "t=4000000000", 1),
		"no passes":       strings.Replace(good, "t=1", "t=0", 1),
		"no lanes":        strings.Replace(good, "p=1", "p=0", 1),
		"no key":          join(parts[0], parts[1], parts[2], parts[3], parts[4], ""),
		"no salt":         join(parts[0], parts[1], parts[2], parts[3], "", parts[5]),
		"not base64":      join(parts[0], parts[1], parts[2], parts[3], "!!", parts[5]),
		"trailing":        good + "$",
		"spaces":          " " + good,
		"plain text":      "x",
	} {
		if ok, err := h.Verify(t.Context(), stored, "x"); ok || !errors.Is(err, ErrHash) {
			t.Errorf("%s: %v, %v; want ErrHash", name, ok, err)
		}
		if !h.NeedsRehash(stored) {
			t.Errorf("%s: needs no renewal", name)
		}
	}
}

func TestHashesWaitForASlot(t *testing.T) {
	t.Parallel()
	h, err := NewHasher(quick, 1)
	if err != nil {
		t.Fatal(err)
	}
	stored, err := h.Hash(t.Context(), "x")
	if err != nil {
		t.Fatal(err)
	}
	h.slots <- struct{}{} // somebody is hashing
	gone, cancel := context.WithCancel(t.Context())
	cancel()
	if _, err := h.Hash(gone, "x"); !errors.Is(err, context.Canceled) {
		t.Errorf("Hash = %v; want the context's end", err)
	}
	// An unknown login and a damaged hash cost a slot as well, so they take as long.
	for _, s := range []string{stored, "", "damaged"} {
		if _, err := h.Verify(gone, s, "x"); !errors.Is(err, context.Canceled) {
			t.Errorf("Verify(%q) = %v; want the context's end", s, err)
		}
	}
	<-h.slots
	var wg sync.WaitGroup
	for range 16 {
		wg.Go(func() {
			if ok, err := h.Verify(t.Context(), stored, "x"); !ok || err != nil {
				t.Errorf("Verify = %v, %v", ok, err)
			}
		})
	}
	wg.Wait()
}

func TestNewHasherRefusesNonsense(t *testing.T) {
	t.Parallel()
	for _, c := range []Cost{{}, {Time: 1, MemoryKiB: 8, Threads: 2}, {Time: 1, MemoryKiB: 2 << 20, Threads: 1}} {
		if _, err := NewHasher(c, 1); err == nil {
			t.Errorf("NewHasher(%+v) was accepted", c)
		}
	}
	if _, err := NewHasher(quick, 0); err == nil {
		t.Error("no slots were accepted")
	}
}

// BenchmarkVerify is one check at the default cost, for a known and an unknown login.
func BenchmarkVerify(b *testing.B) {
	h, err := NewHasher(DefaultCost, 1)
	if err != nil {
		b.Fatal(err)
	}
	stored, err := h.Hash(b.Context(), "seven lazy herons")
	if err != nil {
		b.Fatal(err)
	}
	for name, s := range map[string]string{"known": stored, "unknown": ""} {
		b.Run(name, func(b *testing.B) {
			for b.Loop() {
				if _, err := h.Verify(b.Context(), s, "seven lazy herons"); err != nil {
					b.Fatal(err)
				}
			}
		})
	}
}
