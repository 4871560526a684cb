package auth

import (
	"context"
	"crypto/rand"
	"crypto/subtle"
	"encoding/base64"
	"errors"
	"fmt"
	"strings"

	"golang.org/x/crypto/argon2"
)

// Cost is what one argon2id hash takes.
type Cost struct {
	Time      uint32 // passes
	MemoryKiB uint32
	Threads   uint8
}

// DefaultCost is the second recommended option of RFC 9106, section 4: three
// passes over 64 MiB in four lanes, for machines that cannot spare 2 GiB. A
// person signs in a few times a shift, so a quarter of a second is nothing to
// them, and two at a time are 128 MiB at most, which a small box has.
var DefaultCost = Cost{Time: 3, MemoryKiB: 64 << 10, Threads: 4}

const (
	saltBytes = 16 // RFC 9106, section 4
	keyBytes  = 32

	// A stored string asks for work; a damaged one must not ask for all there is.
	maxTime, maxMemoryKiB = 64, 1 << 20
)

// ErrHash means that a stored hash is not one of ours.
var ErrHash = errors.New("auth: the stored hash cannot be read")

// Hasher makes and checks argon2id hashes, a bounded number at a time. It is
// safe for concurrent use.
type Hasher struct {
	cost  Cost
	slots chan struct{}
	decoy parsed // checked against when there is no such login
}

// NewHasher makes a hasher that computes at most parallel hashes at once;
// the others wait. Memory at the worst is parallel times the cost's.
func NewHasher(cost Cost, parallel int) (*Hasher, error) {
	if !cost.sane() || parallel < 1 {
		return nil, fmt.Errorf("auth: cost %+v or %d in parallel makes no sense", cost, parallel)
	}
	h := &Hasher{cost: cost, slots: make(chan struct{}, parallel)}
	h.decoy = parsed{cost: cost, salt: make([]byte, saltBytes), key: make([]byte, keyBytes)}
	_, _ = rand.Read(h.decoy.salt) // never fails: see crypto/rand
	_, _ = rand.Read(h.decoy.key)
	return h, nil
}

func (c Cost) sane() bool {
	return c.Time >= 1 && c.Time <= maxTime && c.Threads >= 1 &&
		c.MemoryKiB >= 8*uint32(c.Threads) && c.MemoryKiB <= maxMemoryKiB
}

// Hash gives the string to store for a secret: $argon2id$v=19$m=…,t=…,p=…$salt$key.
// The only errors are a secret that Rules would refuse as too long, and a
// context that ends while waiting.
func (h *Hasher) Hash(ctx context.Context, s Secret) (string, error) {
	text, ok := s.normal()
	if !ok {
		return "", errors.New("auth: the secret is too long or not text")
	}
	p := parsed{cost: h.cost, salt: make([]byte, saltBytes)}
	_, _ = rand.Read(p.salt)
	key, err := h.derive(ctx, text, p, keyBytes)
	if err != nil {
		return "", err
	}
	p.key = key
	return p.String(), nil
}

// Verify reports whether the secret belongs to the stored hash. An empty stored
// string stands for an unknown login: it costs the same time and is false, so
// that the time does not tell who exists. A damaged string is ErrHash.
func (h *Hasher) Verify(ctx context.Context, stored string, s Secret) (bool, error) {
	p, known := h.decoy, stored != ""
	var damaged error
	if known {
		if p, damaged = parse(stored); damaged != nil {
			p = h.decoy
		}
	}
	text, ok := s.normal()
	key, err := h.derive(ctx, text, p, len(p.key))
	if err != nil {
		return false, err
	}
	equal := subtle.ConstantTimeCompare(key, p.key) == 1
	return equal && known && ok && damaged == nil, damaged
}

// NeedsRehash reports whether a stored hash was made at another cost than the
// present one, and should be made anew when the secret is next at hand.
func (h *Hasher) NeedsRehash(stored string) bool {
	p, err := parse(stored)
	return err != nil || p.cost != h.cost || len(p.salt) != saltBytes || len(p.key) != keyBytes
}

func (h *Hasher) derive(ctx context.Context, text string, p parsed, length int) ([]byte, error) {
	select {
	case h.slots <- struct{}{}:
	case <-ctx.Done():
		return nil, fmt.Errorf("auth: wait for a free slot to hash: %w", ctx.Err())
	}
	defer func() { <-h.slots }()
	return argon2.IDKey([]byte(text), p.salt, p.cost.Time, p.cost.MemoryKiB, p.cost.Threads, uint32(length)), nil
}

type parsed struct {
	cost      Cost
	salt, key []byte
}

var b64 = base64.RawStdEncoding.Strict()

func (p parsed) String() string {
	return fmt.Sprintf("$argon2id$v=%d$m=%d,t=%d,p=%d$%s$%s", argon2.Version,
		p.cost.MemoryKiB, p.cost.Time, p.cost.Threads, b64.EncodeToString(p.salt), b64.EncodeToString(p.key))
}

func parse(stored string) (parsed, error) {
	var p parsed
	parts := strings.Split(stored, "$")
	if len(parts) != 6 || parts[0] != "" || parts[1] != "argon2id" || parts[2] != fmt.Sprintf("v=%d", argon2.Version) {
		return p, ErrHash
	}
	if _, err := fmt.Sscanf(parts[3], "m=%d,t=%d,p=%d", &p.cost.MemoryKiB, &p.cost.Time, &p.cost.Threads); err != nil {
		return p, fmt.Errorf("%w: %w", ErrHash, err)
	}
	var err1, err2 error
	p.salt, err1 = b64.DecodeString(parts[4])
	p.key, err2 = b64.DecodeString(parts[5])
	if err := errors.Join(err1, err2); err != nil {
		return p, fmt.Errorf("%w: %w", ErrHash, err)
	}
	if !p.cost.sane() || len(p.salt) < 8 || len(p.salt) > 64 || len(p.key) < 16 || len(p.key) > 64 || p.String() != stored {
		return p, ErrHash
	}
	return p, nil
}
