package ui

import "time"

// lockWarns is how long before a tablet locks it says so. WCAG 2.2, success criterion
// 2.2.1, asks for at least 20 seconds and one simple action to extend, at least ten
// times; here there is no end to it.
const lockWarns = 30 * time.Second

// sessionWarns is how long before a session ends each page of it says so. It ends where
// nothing was requested for hours, on a shift's length after signing in, or at last a day
// after it; all but the last is put off by one press, so that only a limit of more than
// 20 hours remains, which the same criterion leaves free.
const sessionWarns = 10 * time.Minute

// sessionLeft is how long the session goes on if nothing more is requested.
func (s Shell) sessionLeft() time.Duration { return s.SessionEnds.Sub(s.Now) }

// locks reports whether the page locks when nobody touches it: on a tablet that somebody
// is signed in at.
func (s Shell) locks() bool { return s.SignedIn && s.OnTablet() && s.Device.LockAfter > 0 }
