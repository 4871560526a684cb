package auth

import (
	"cmp"
	"context"
	"crypto/rand"
	"crypto/sha256"
	"fmt"
	"log/slog"
	"net/http"
	"net/netip"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// DeviceStore is where devices are kept.
type DeviceStore interface {
	// DeviceBySecret finds a device by the hash of its secret, also a revoked one. There
	// being none is a plant.NotFound.
	DeviceBySecret(ctx context.Context, hash []byte) (plant.Device, error)
	// ActiveDevices gives those of the devices that are let in.
	ActiveDevices(ctx context.Context, ids []uuid.UUID) ([]uuid.UUID, error)
	// Enrol uses a code up; a wrong one is plant.Invalid.
	Enrol(ctx context.Context, code string, secretHash []byte) (plant.Device, error)
	NoteContact(ctx context.Context, ids ...uuid.UUID) error
	NotePresence(ctx context.Context, device, person uuid.UUID) error
}

// DeviceOptions are the settings of Devices. Store is needed.
type DeviceOptions struct {
	Store     DeviceStore
	PlainHTTP bool // as in SessionOptions
	Now       func() time.Time
	Log       *slog.Logger
}

// Devices knows tablets, wall screens and senders by their secrets. A tablet or wall
// screen has its secret in a cookie, a sender sends it as a token; the store holds its
// hash only. The secrets are 130 random bits, so a plain SHA-256 is enough: there is
// nothing to guess. It is safe for concurrent use; the methods that sessions call may be
// called on nil, which knows no device.
type Devices struct {
	opt      DeviceOptions
	throttle *Throttle // of codes

	mu       sync.Mutex
	entries  map[[sha256.Size]byte]cachedDevice
	forgets  uint64
	contacts map[uuid.UUID]time.Time
}

type cachedDevice struct {
	device plant.Device // the zero value: there is none
	until  time.Time
}

const (
	// deviceCacheFor bounds how long a revoked device is still answered, here and on
	// other servers.
	deviceCacheFor  = 500 * time.Millisecond
	contactEvery    = time.Minute
	deviceCookieAge = 400 * 24 * time.Hour // the most that browsers keep one; renewed at work
	maxDeviceToken  = 100
)

// NewDevices makes it.
func NewDevices(opt DeviceOptions) *Devices {
	if opt.Now == nil {
		opt.Now = time.Now
	}
	opt.Log = cmp.Or(opt.Log, slog.Default())
	return &Devices{opt: opt, throttle: NewThrottle(opt.Now), entries: map[[sha256.Size]byte]cachedDevice{}, contacts: map[uuid.UUID]time.Time{}}
}

// Authenticate gives the device whose secret this token is, and notes that it was heard
// of. A token of nothing and one that was revoked are plant.Forbidden; everything else is
// a fault. What the device may do is the caller's question: ask for its Kind.
func (d *Devices) Authenticate(ctx context.Context, token string) (plant.Device, error) {
	device, err := d.find(ctx, token)
	if err != nil {
		return plant.Device{}, err
	}
	if !device.Active() {
		return plant.Device{}, plant.Forbiddenf("", "This device is not enrolled, or no longer. Ask an administrator for a code.")
	}
	d.heard(ctx, device.ID)
	return device, nil
}

// find gives the device of a token, also a revoked one; the zero value when there is none.
func (d *Devices) find(ctx context.Context, token string) (plant.Device, error) {
	if d == nil || token == "" || len(token) > maxDeviceToken {
		return plant.Device{}, nil
	}
	key := sha256.Sum256([]byte(token))
	d.mu.Lock()
	e, ok := d.entries[key]
	forgets := d.forgets
	d.mu.Unlock()
	if ok && d.opt.Now().Before(e.until) {
		return e.device, nil
	}
	device, err := d.opt.Store.DeviceBySecret(ctx, key[:])
	if err != nil && !plant.IsKind(err, plant.NotFound) {
		return plant.Device{}, fmt.Errorf("find a device: %w", err)
	}
	if err != nil {
		device = plant.Device{}
	}
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.forgets == forgets {
		if len(d.entries) >= cacheMost {
			clear(d.entries)
		}
		d.entries[key] = cachedDevice{device, d.opt.Now().Add(deviceCacheFor)}
	}
	return device, nil
}

// Forget drops what is remembered of devices, after one was changed or revoked on this
// server.
func (d *Devices) Forget() {
	d.mu.Lock()
	defer d.mu.Unlock()
	d.forgets++
	clear(d.entries)
}

// heard notes the contact of devices, at most once a minute each, because each note is a
// write. That it cannot be noted is no reason to turn a device away.
func (d *Devices) heard(ctx context.Context, ids ...uuid.UUID) {
	now := d.opt.Now()
	d.mu.Lock()
	var due []uuid.UUID
	for _, id := range ids {
		if last, ok := d.contacts[id]; !ok || now.Sub(last) >= contactEvery {
			d.contacts[id] = now
			due = append(due, id)
		}
	}
	d.mu.Unlock()
	if len(due) == 0 {
		return
	}
	if err := d.opt.Store.NoteContact(context.WithoutCancel(ctx), due...); err != nil {
		d.opt.Log.ErrorContext(ctx, "auth: note the contact of a device", "error", err)
	}
}

func (d *Devices) cookieName() string {
	if d.opt.PlainHTTP {
		return "device"
	}
	return "__Host-device"
}

func (d *Devices) fromRequest(r *http.Request) (plant.Device, error) {
	if d == nil {
		return plant.Device{}, nil
	}
	c, err := r.Cookie(d.cookieName())
	if err != nil {
		return plant.Device{}, nil
	}
	device, err := d.find(r.Context(), c.Value)
	if err != nil || device.Kind == plant.Sender { // a token, not a browser's
		return plant.Device{}, err
	}
	if device.Active() {
		d.heard(r.Context(), device.ID)
	}
	return device, nil
}

// renew gives the cookie its full age again now and then, so that a screen that is in
// use is never forgotten by its browser.
func (d *Devices) renew(w http.ResponseWriter, r *http.Request) {
	if d == nil {
		return
	}
	v := visitOf(r.Context())
	if !v.device.Active() || r.Method != http.MethodGet {
		return
	}
	const kept = "device-kept" // says to this server that the other cookie is young
	if _, err := r.Cookie(kept); err == nil {
		return
	}
	c, err := r.Cookie(d.cookieName())
	if err != nil {
		return
	}
	d.setCookie(w, c.Value, deviceCookieAge)
	http.SetCookie(w, &http.Cookie{Name: kept, Value: "yes", Path: "/", MaxAge: 30 * 24 * 60 * 60, HttpOnly: true,
		Secure: !d.opt.PlainHTTP, SameSite: http.SameSiteLaxMode})
}

func (d *Devices) setCookie(w http.ResponseWriter, token string, age time.Duration) {
	http.SetCookie(w, &http.Cookie{Name: d.cookieName(), Value: token, Path: "/", MaxAge: int(age / time.Second), HttpOnly: true,
		Secure: !d.opt.PlainHTTP, SameSite: http.SameSiteLaxMode})
}

// Enrol uses up a code that was typed and returns the device with its secret. Wrong
// codes cost growing pauses, by where they come from and over all; during one it answers
// plant.Forbidden. The secret is told here once and never again.
func (d *Devices) Enrol(ctx context.Context, code string, from netip.Addr) (plant.Device, string, error) {
	attempt, pause := d.throttle.Try("code", sourceOf(ctx, from))
	if pause > 0 {
		return plant.Device{}, "", waitFor("code", pause)
	}
	token := rand.Text()
	sum := sha256.Sum256([]byte(token))
	device, err := d.opt.Store.Enrol(ctx, strings.Map(digitsOnly, code), sum[:])
	if err != nil {
		if !plant.IsKind(err, plant.Invalid) {
			attempt.Void()
		}
		return plant.Device{}, "", err
	}
	attempt.Succeeded()
	d.Forget()
	return device, token, nil
}

func digitsOnly(r rune) rune {
	if r < '0' || r > '9' {
		return -1
	}
	return r
}

// Seat makes this browser the device whose secret was told by Enrol.
func (d *Devices) Seat(w http.ResponseWriter, token string) { d.setCookie(w, token, deviceCookieAge) }

// DeviceFrom gives the device that the request comes from; false when it is none, or one
// that was revoked.
func DeviceFrom(ctx context.Context) (plant.Device, bool) {
	v, ok := ctx.Value(visitKey{}).(*visit)
	if !ok || !v.device.Active() {
		return plant.Device{}, false
	}
	return v.device, true
}

// Revoked reports that the request came from a device that was let in once, so that the
// page can say what happened.
func Revoked(ctx context.Context) bool {
	v, ok := ctx.Value(visitKey{}).(*visit)
	return ok && v.revoked
}

const aloneSession = "device:"

// DeviceSession names the sockets of a device without a person, as Sessions.ID names
// those of somebody who is signed in.
func DeviceSession(id uuid.UUID) string { return aloneSession + id.String() }

func deviceOfSession(session string) (uuid.UUID, bool) {
	text, ok := strings.CutPrefix(session, aloneSession)
	if !ok {
		return uuid.Nil, false
	}
	id, err := uuid.Parse(text)
	return id, err == nil
}

// present tells which devices with sockets are let in, and notes that they were heard
// of: an open page sends no requests. Where one is not let in any more, what is remembered
// is forgotten first: its page asks for another as soon as its socket ends.
func (d *Devices) present(ctx context.Context, ids []uuid.UUID) (map[uuid.UUID]bool, error) {
	if d == nil || len(ids) == 0 {
		return nil, nil
	}
	active, err := d.opt.Store.ActiveDevices(ctx, ids)
	if err != nil {
		return nil, fmt.Errorf("look up devices: %w", err)
	}
	letIn := make(map[uuid.UUID]bool, len(active))
	for _, id := range active {
		letIn[id] = true
	}
	if slices.ContainsFunc(ids, func(id uuid.UUID) bool { return !letIn[id] }) {
		d.Forget()
	}
	d.heard(ctx, active...)
	return letIn, nil
}

func (d *Devices) notePresence(ctx context.Context, device, person uuid.UUID) error {
	if d == nil {
		return nil
	}
	return d.opt.Store.NotePresence(ctx, device, person)
}
