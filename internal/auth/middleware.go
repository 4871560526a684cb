package auth

import (
	"context"
	"fmt"
	"net/http"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// visit is what one request knows of its session. A handler that signs in or
// out changes it, and who reads it afterwards sees that.
type visit struct {
	person   plant.Person
	signedIn bool
	timedOut bool
	begun    bool // signed in during this request
	byPIN    bool // the session was begun with a PIN
	device   plant.Device
	revoked  bool // it came with the secret of a device that was revoked
}

type visitKey struct{}

// visitOf panics outside of the middleware, which is a mistake in the wiring.
func visitOf(ctx context.Context) *visit {
	v, ok := ctx.Value(visitKey{}).(*visit)
	if !ok {
		panic("auth: no session middleware around this handler")
	}
	return v
}

// FromContext gives who is signed in; false when nobody is.
func FromContext(ctx context.Context) (plant.Person, bool) {
	v, ok := ctx.Value(visitKey{}).(*visit)
	if !ok || !v.signedIn {
		return plant.Person{}, false
	}
	return v.person, true
}

// ByPIN reports that the session of this request was begun with a badge and a PIN.
func ByPIN(ctx context.Context) bool {
	v, ok := ctx.Value(visitKey{}).(*visit)
	return ok && v.signedIn && v.byPIN
}

// TimedOut reports that this request came with a session that had not been used
// for too long, so that the sign-in page can say why it appears.
func TimedOut(ctx context.Context) bool {
	v, ok := ctx.Value(visitKey{}).(*visit)
	return ok && v.timedOut
}

// Middleware loads the session and who it belongs to, and writes the session and
// its cookie when they changed. It turns nobody away. The response is wrapped,
// so sockets need LoadOnly.
func (s *Sessions) Middleware(next http.Handler) http.Handler {
	inner := s.scs.LoadAndSave(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		ctx := r.Context()
		over, err := s.admit(ctx)
		if err == nil && over {
			err = s.SignOut(ctx)
		}
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		s.opt.Devices.renew(w, r)
		s.touch(ctx)
		next.ServeHTTP(w, r)
	}))
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		r, err := s.withVisit(r)
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		inner.ServeHTTP(w, r)
	})
}

// LoadOnly loads the session and who it belongs to and writes nothing: neither
// the session nor its last use nor a cookie. The response is not wrapped, so
// sockets can be opened behind it.
func (s *Sessions) LoadOnly(next http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Add("Vary", "Cookie")
		var token string
		if c, err := r.Cookie(s.scs.Cookie.Name); err == nil {
			token = c.Value
		}
		r, err := s.withVisit(r)
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		ctx, err := s.scs.Load(r.Context(), token)
		if err == nil {
			_, err = s.admit(ctx)
		}
		if err != nil {
			s.opt.Fail(w, r, err)
			return
		}
		next.ServeHTTP(w, r.WithContext(ctx))
	})
}

// withVisit begins the visit with the device that the request comes from, if it is one.
func (s *Sessions) withVisit(r *http.Request) (*http.Request, error) {
	v := &visit{}
	r = r.WithContext(context.WithValue(r.Context(), visitKey{}, v))
	device, err := s.opt.Devices.fromRequest(r)
	if err != nil {
		return r, err
	}
	switch {
	case device.Active():
		v.device = device
	case device.ID != uuid.Nil:
		v.revoked = true
	}
	return r, nil
}

// admit finds out who the loaded session belongs to. over means that there is a
// session that must not be used any more.
func (s *Sessions) admit(ctx context.Context) (over bool, err error) {
	text := s.scs.GetString(ctx, keyPerson)
	if text == "" {
		return false, nil
	}
	v := visitOf(ctx)
	id, err := uuid.Parse(text)
	if err != nil {
		return false, fmt.Errorf("read who a session belongs to: %w", err)
	}
	now := s.opt.Now()
	if !now.Before(s.scs.Deadline(ctx)) {
		return true, nil
	}
	if on := s.scs.GetString(ctx, keyDevice); on != "" && on != v.device.ID.String() {
		return true, nil // begun on a device that this is not, or no longer
	}
	if now.Sub(time.Unix(s.scs.GetInt64(ctx, keySeen), 0)) >= s.idle(v.device) {
		v.timedOut = true
		return true, nil
	}
	p, err := s.people.find(ctx, id)
	switch {
	case plant.IsKind(err, plant.NotFound) || (err == nil && !p.Active):
		return true, nil
	case err != nil:
		return false, fmt.Errorf("find who is signed in: %w", err)
	}
	if time.UnixMicro(s.scs.GetInt64(ctx, keyBegun)).Before(p.SessionsSince) {
		return true, nil
	}
	if v.byPIN = s.scs.GetBool(ctx, keyPIN); v.byPIN {
		p = p.AtTablet()
	}
	v.person, v.signedIn = p, true
	return false, nil
}

// touch notes the use of the session, at most once a minute, because each note
// is a write to the store.
func (s *Sessions) touch(ctx context.Context) {
	if !visitOf(ctx).signedIn {
		return
	}
	now := s.opt.Now()
	if now.Sub(time.Unix(s.scs.GetInt64(ctx, keySeen), 0)) >= touchEvery {
		s.scs.Put(ctx, keySeen, now.Unix())
	}
}
