package ui

import "time"

// lockWarns is how long before a tablet locks it says so. WCAG 2.2, success criterion
// 2.2.1, asks for at least 20 seconds and one simple action to extend, at least ten
// times; here there is no end to it.
const lockWarns = 30 * time.Second

// locks reports whether the page locks when nobody touches it: on a tablet that somebody
// is signed in at.
func (s Shell) locks() bool { return s.SignedIn && s.OnTablet() && s.Device.LockAfter > 0 }
