package outbox

import (
	"context"
	"errors"
	"log/slog"
	"math/rand/v2"
	"sync"
	"time"

	"holdfast/internal/plant"
)

// Store is where messages wait.
type Store interface {
	ClaimMessages(ctx context.Context, target string, most int, lease time.Duration) ([]plant.Outgoing, error)
	MessageDelivered(ctx context.Context, m plant.Outgoing) error
	MessageFailed(ctx context.Context, m plant.Outgoing, why string, next time.Time, pause, giveUp bool) (gaveUp bool, err error)
	TargetFailures(ctx context.Context, target string) (int, error)
	GiveUpExpired(ctx context.Context, why string) (int, error)
}

// Sender takes one message to its target.
type Sender interface {
	Send(ctx context.Context, m plant.Outgoing) error
}

// How attempts are spaced.
const (
	firstPause  = 15 * time.Second
	longPause   = 15 * time.Minute
	lease       = 2 * time.Minute // more than one attempt takes
	lastingMost = 3               // attempts at what is refused for good
)

// Worker delivers what waits. Several may run on one store.
type Worker struct {
	Store   Store
	Senders map[string]Sender // by target
	Log     *slog.Logger
	Now     func() time.Time
	Every   time.Duration // between looks; 0: 3 s
	Failed  func()        // called after a message was given up; may be nil
}

// Run delivers until ctx ends. Each target has a goroutine of its own, so that one that
// hangs keeps nobody else waiting.
func (w *Worker) Run(ctx context.Context) {
	every := w.Every
	if every == 0 {
		every = 3 * time.Second
	}
	var wg sync.WaitGroup
	for target := range w.Senders {
		wg.Go(func() { repeat(ctx, every, func() { w.report(ctx, target, w.Deliver(ctx, target)) }) })
	}
	wg.Go(func() { repeat(ctx, time.Minute, func() { w.report(ctx, "", w.GiveUp(ctx)) }) })
	wg.Wait()
}

func repeat(ctx context.Context, every time.Duration, f func()) {
	t := time.NewTicker(every)
	defer t.Stop()
	for {
		f()
		select {
		case <-ctx.Done():
			return
		case <-t.C:
		}
	}
}

func (w *Worker) report(ctx context.Context, target string, err error) {
	if err != nil && ctx.Err() == nil {
		w.Log.Warn("could not look after outgoing messages", "target", target, "error", err)
	}
}

// Deliver tries what is due for one target until nothing is, or an attempt fails.
func (w *Worker) Deliver(ctx context.Context, target string) error {
	for {
		list, err := w.Store.ClaimMessages(ctx, target, 1, lease)
		if err != nil || len(list) == 0 {
			return err
		}
		if ok, err := w.try(ctx, list[0]); err != nil || !ok {
			return err
		}
	}
}

// try makes one attempt and notes what came of it.
func (w *Worker) try(ctx context.Context, m plant.Outgoing) (ok bool, err error) {
	failure := w.Senders[m.Target].Send(ctx, m)
	if ctx.Err() != nil {
		return false, nil // we stop: the claim runs out, and somebody tries again
	}
	if failure == nil {
		w.Log.Info("a message was delivered", "target", m.Target, "message", m.ID, "attempts", m.Attempts)
		return true, w.Store.MessageDelivered(ctx, m)
	}
	failures, err := w.Store.TargetFailures(ctx, m.Target)
	if err != nil {
		return false, err
	}
	pause, giveUp := Backoff(failures), false
	refused, isRefused := errors.AsType[*Refused](failure)
	if isRefused {
		pause = max(pause, refused.After)
		giveUp = refused.Lasting && m.Attempts >= lastingMost
	}
	why := explain(failure)
	gaveUp, err := w.Store.MessageFailed(ctx, m, why, w.Now().Add(pause), !isRefused || !refused.Lasting, giveUp)
	w.Log.Warn("a message could not be delivered", "target", m.Target, "message", m.ID, "attempts", m.Attempts, "why", why, "given_up", gaveUp)
	if gaveUp && w.Failed != nil {
		w.Failed()
	}
	return false, err
}

// GiveUp lists what waits beyond its time as not delivered.
func (w *Worker) GiveUp(ctx context.Context) error {
	n, err := w.Store.GiveUpExpired(ctx, "No server has this target in its configuration, or it was out of reach all the time.")
	if n > 0 {
		w.Log.Warn("messages waited beyond their time and were given up", "messages", n)
		if w.Failed != nil {
			w.Failed()
		}
	}
	return err
}

// Backoff is how long a target is left alone that has failed so many times in a row
// before: it doubles with each failure up to a cap, and half of it is random, so that
// servers that were cut off together do not come back together.
func Backoff(failures int) time.Duration {
	d := longPause
	if failures < 10 {
		d = min(firstPause<<max(failures, 0), longPause)
	}
	return d/2 + rand.N(d/2+1)
}
