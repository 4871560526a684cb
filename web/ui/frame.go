package ui

import (
	"context"
	"net/http"
	"net/netip"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/words"
)

// Frame is what all pages of one request share. The router gathers it once, before
// any surface is asked.
type Frame struct {
	Person      plant.Person // the zero value when nobody is signed in
	SignedIn    bool
	Session     string       // names the session to the live hub; never the secret itself
	SessionEnds time.Time    // if nothing more is requested; zero when nobody is signed in
	Device      plant.Device // that the browser is enrolled as; the zero value when it is none
	Revoked     bool         // the browser was enrolled once and is no longer let in
	Addr        netip.Addr   // of the browser, or of the proxy nearest to us that is not trusted
	Plant       plant.Plant
	Now         time.Time
	Theme       Theme
	Words       *words.Printer
	RequestID   string
	Secure      bool // cookies are sent over https only
}

type frameKey struct{}

// WithFrame returns a request that carries the frame.
func WithFrame(r *http.Request, f Frame) *http.Request {
	return r.WithContext(context.WithValue(r.Context(), frameKey{}, f))
}

// FrameOf returns the frame of a request. What the router has not filled in gets a
// plain default, so that a surface can be tested without it.
func FrameOf(r *http.Request) Frame {
	f, _ := r.Context().Value(frameKey{}).(Frame)
	if f.Now.IsZero() {
		f.Now = time.Now()
	}
	if f.Plant.Location == nil {
		f.Plant.Location = time.UTC
	}
	if f.Words == nil {
		f.Words = words.From(r)
	}
	if f.Theme == "" {
		f.Theme = ThemeOf(r)
	}
	return f
}

// OnTablet reports whether the browser is an enrolled tablet.
func (f Frame) OnTablet() bool { return f.Device.Active() && f.Device.Kind == plant.Tablet }

// OnWall reports whether the browser is a wall screen that nobody is signed in at.
func (f Frame) OnWall() bool {
	return !f.SignedIn && f.Device.Active() && f.Device.Kind == plant.Wall
}

// Format is how times and numbers are written in this request.
func (f Frame) Format() Format { return NewFormat(f.Words, f.Plant.Location, f.Now) }
