package auth

import (
	"context"
	"errors"
	"io"
	"log/slog"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// book is a Credentials and a People in memory.
type book struct {
	mu     sync.Mutex
	people map[uuid.UUID]plant.Person
	hashes map[uuid.UUID]string
	err    error
	asked  int // calls of Person
}

func newBook() *book {
	return &book{people: make(map[uuid.UUID]plant.Person), hashes: make(map[uuid.UUID]string)}
}

func (b *book) put(p plant.Person, hash string) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.people[p.ID], b.hashes[p.ID] = p, hash
}

func (b *book) fail(err error) { b.mu.Lock(); defer b.mu.Unlock(); b.err = err }

var errNobody = &plant.Error{Kind: plant.NotFound, Message: "There is no such person."}

func (b *book) Credential(_ context.Context, login string) (plant.Person, string, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.err != nil {
		return plant.Person{}, "", b.err
	}
	for id, p := range b.people {
		if p.Login == login {
			return p, b.hashes[id], nil
		}
	}
	return plant.Person{}, "", errNobody
}

// CredentialByBadge finds people by their badge; their secret is also their PIN here.
func (b *book) CredentialByBadge(_ context.Context, badge string) (plant.Person, string, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	for id, p := range b.people {
		if p.Badge == badge && badge != "" {
			return p, b.hashes[id], nil
		}
	}
	return plant.Person{}, "", errNobody
}

func (b *book) Rehash(_ context.Context, person uuid.UUID, old, fresh string) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	if b.hashes[person] == old {
		b.hashes[person] = fresh
	}
	return nil
}

func (b *book) Person(_ context.Context, id uuid.UUID) (plant.Person, error) {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.asked++
	if b.err != nil {
		return plant.Person{}, b.err
	}
	p, ok := b.people[id]
	if !ok {
		return plant.Person{}, errNobody
	}
	return p, nil
}

func anna() plant.Person {
	return plant.Person{ID: uuid.MustParse("01890a5d-ac96-774b-bcce-b302099a8057"), Login: "anna",
		Name: "Operator 1", Roles: plant.Roles{plant.Operator}, Active: true}
}

const annasSecret = "seven lazy herons"

func newDoor(t *testing.T, c *clock) (*Door, *book) {
	t.Helper()
	h := quickHasher(t)
	hash, err := h.Hash(t.Context(), annasSecret)
	if err != nil {
		t.Fatal(err)
	}
	b := newBook()
	b.put(anna(), hash)
	return &Door{Credentials: b, Hasher: h, Throttle: NewThrottle(c.now), Log: slog.New(slog.NewTextHandler(io.Discard, nil))}, b
}

func TestDoorLetsInWhoKnowsTheSecret(t *testing.T) {
	t.Parallel()
	d, _ := newDoor(t, newClock())
	p, err := d.Check(t.Context(), " Anna ", annasSecret, tablet)
	if err != nil || p.ID != anna().ID {
		t.Errorf("Check = %+v, %v; want anna", p, err)
	}
}

func TestDoorAnswersAllWrongTriesAlike(t *testing.T) {
	t.Parallel()
	d, b := newDoor(t, newClock())
	gone := anna()
	gone.ID, gone.Login, gone.Active = uuid.New(), "gone", false
	b.put(gone, b.hashes[anna().ID])
	var first string
	for _, login := range []string{"anna", "nobody", "gone", ""} {
		secret := Secret(annasSecret)
		if login == "anna" {
			secret = "another"
		}
		_, err := d.Check(t.Context(), login, secret, tablet)
		if !plant.IsKind(err, plant.Invalid) {
			t.Errorf("%q: %v; want Invalid", login, err)
			continue
		}
		if first == "" {
			first = err.Error()
		}
		if err.Error() != first {
			t.Errorf("%q: %q tells more than %q", login, err, first)
		}
	}
}

func TestDoorMakesGuessersWaitAndNobodyElse(t *testing.T) {
	t.Parallel()
	c := newClock()
	d, _ := newDoor(t, c)
	for range 5 {
		_, _ = d.Check(t.Context(), "anna", "guess", intruder)
	}
	_, err := d.Check(t.Context(), "anna", annasSecret, intruder) // even the right one is not looked at
	if !plant.IsKind(err, plant.Forbidden) || !strings.Contains(err.Error(), "1 second.") {
		t.Errorf("sixth try = %v; want to be told to wait 1 second", err)
	}
	if _, err := d.Check(t.Context(), "anna", annasSecret, tablet); err != nil {
		t.Errorf("anna at her own tablet: %v", err)
	}
	c.add(time.Second)
	if _, err := d.Check(t.Context(), "anna", annasSecret, intruder); err != nil {
		t.Errorf("after the pause: %v", err)
	}
}

func TestDoorDoesNotCountFaultsOfOurs(t *testing.T) {
	t.Parallel()
	d, b := newDoor(t, newClock())
	b.fail(errors.New("the database is away"))
	for range 50 {
		if _, err := d.Check(t.Context(), "anna", annasSecret, tablet); err == nil || plant.IsKind(err, plant.Forbidden) || plant.IsKind(err, plant.Invalid) {
			t.Fatalf("Check = %v; want the fault", err)
		}
	}
	b.fail(nil)
	if _, err := d.Check(t.Context(), "anna", annasSecret, tablet); err != nil {
		t.Errorf("once it is back: %v", err)
	}
}

func TestDoorRenewsHashesOfAnotherCost(t *testing.T) {
	t.Parallel()
	d, b := newDoor(t, newClock())
	old := b.hashes[anna().ID]
	dearer, err := NewHasher(Cost{Time: 2, MemoryKiB: 64, Threads: 1}, 1)
	if err != nil {
		t.Fatal(err)
	}
	d.Hasher = dearer
	if _, err := d.Check(t.Context(), "anna", annasSecret, tablet); err != nil {
		t.Fatal(err)
	}
	fresh := b.hashes[anna().ID]
	if fresh == old || dearer.NeedsRehash(fresh) {
		t.Errorf("stored hash is %s; want one of the new cost", fresh)
	}
	if _, err := d.Check(t.Context(), "anna", annasSecret, tablet); err != nil {
		t.Errorf("with the renewed hash: %v", err)
	}
}

func TestPausesInWordsAreNeverTooShort(t *testing.T) {
	t.Parallel()
	for d, want := range map[time.Duration]string{
		time.Millisecond: "1 second", time.Second: "1 second", 1001 * time.Millisecond: "2 seconds",
		59 * time.Second: "59 seconds", time.Minute: "1 minute", 61 * time.Second: "2 minutes", 5 * time.Minute: "5 minutes",
	} {
		if got := waitFor("password", d); got.Kind != plant.Forbidden || got.Message != "Too many wrong tries. Try again in "+want+"." {
			t.Errorf("waiting for %v: %q; want %q", d, got.Message, want)
		}
	}
}
