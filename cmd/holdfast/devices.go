package main

import (
	"context"
	"fmt"
	"os"

	"github.com/google/uuid"

	"holdfast/internal/auth"
	"holdfast/internal/demo"
	"holdfast/internal/plant"
	"holdfast/internal/store"
	"holdfast/web/account"
	"holdfast/web/admin"
	doorpages "holdfast/web/door"
)

// tablet is what enrolling and signing in by badge need.
func (p *program) tablet(door *auth.Door) *doorpages.Tablet {
	t := &doorpages.Tablet{Pins: door, Sessions: p.sessions, Devices: p.devices}
	if p.Demo {
		for _, b := range demo.Badges() {
			t.Badges = append(t.Badges, doorpages.DemoBadge(b))
		}
	}
	return t
}

// staff is what the pages of people and devices need. What is changed there counts at
// once: sockets of who or what is out are ended, not only at the next recheck.
func (p *program) staff(hasher *auth.Hasher) *admin.Staff {
	authority := ""
	if p.Transport.root != nil {
		authority = doorpages.AuthorityAddress
	}
	return &admin.Staff{
		Store: p.store, AuthorityAt: authority, Outside: p.otherMachines,
		Hash: func(ctx context.Context, s auth.Secret) (string, error) { return hasher.Hash(ctx, s) },
		Changed: func(person uuid.UUID) {
			p.sessions.Forget(person)
			p.hub.Recheck()
		},
		DeviceChanged: func(uuid.UUID) {
			p.devices.Forget()
			p.hub.Recheck()
		},
		Sessions: sessionEnder{p.sessions, p.store},
	}
}

// account is everybody's own page.
func (p *program) account(door *auth.Door, hasher *auth.Hasher) *account.Surface {
	return account.New(account.Deps{
		Store: p.store, Checker: door, Sessions: sessionEnder{p.sessions, p.store}, Log: p.Log,
		Hash: func(ctx context.Context, s auth.Secret) (string, error) { return hasher.Hash(ctx, s) },
		Changed: func(person uuid.UUID) {
			p.sessions.Forget(person)
			p.hub.Recheck()
		},
	})
}

// sessionEnder are the sessions; when one is ended, all servers hear of it.
type sessionEnder struct {
	*auth.Sessions
	store *store.Store
}

// End ends one session of a person.
func (e sessionEnder) End(ctx context.Context, person uuid.UUID, id string) error {
	ended, err := e.Sessions.End(person, id)
	if ended {
		e.store.SessionEnded(ctx)
	}
	return err
}

// admissionChanged forgets who and what was let in and asks again about all sockets: it was
// changed by some server, or on the command line.
func (p *program) admissionChanged() {
	p.devices.Forget()
	p.sessions.ForgetAll()
	p.hub.Recheck()
}

// openFirst draws the one-time address under which the first person is made, where there
// is nobody yet.
func (p *program) openFirst(ctx context.Context, hasher *auth.Hasher) error {
	nobody, err := p.nobody(ctx)
	if err != nil || !nobody {
		return err
	}
	p.first = doorpages.NewFirst(func(ctx context.Context, person plant.Person, s auth.Secret) error {
		hash, err := hasher.Hash(ctx, s)
		if err != nil {
			return err
		}
		return p.store.AddFirstPerson(ctx, person, hash)
	}, p.nobody)
	return nil
}

// nobody reports that nobody was ever added.
func (p *program) nobody(ctx context.Context) (bool, error) {
	people, err := p.store.People(ctx)
	return len(people) == 0, err
}

// tellFirst prints that address, on standard error and not through the log, which may be
// kept where others read it.
func (p *program) tellFirst() {
	if p.first == nil {
		return
	}
	fmt.Fprintf(os.Stderr, "\nNobody can sign in yet. Open this once, on this machine or over https, and make the first person:\n\n    %s%s\n\nIt works until it was used or the program stops.\n\n",
		p.fromOutside(), p.first.Path())
}
