package main

import (
	"holdfast/internal/auth"
	doorpages "holdfast/web/door"
)

// tablet is what enrolling and signing in by badge need.
func (p *program) tablet(door *auth.Door) *doorpages.Tablet {
	return &doorpages.Tablet{Pins: door, Sessions: p.sessions, Devices: p.devices}
}
