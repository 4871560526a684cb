package admin

import (
	"context"
	"fmt"
	"log/slog"
	"runtime/debug"
	"slices"
	"sync"
	"time"

	"holdfast/internal/qualify"
)

// Runner runs the installation qualification, as qualify.Report does.
type Runner func(ctx context.Context, opt qualify.Options) (qualify.Record, error)

// progress is a qualification that runs.
type progress struct {
	Began  time.Time
	By     string
	Values int // computed so far
	Groups []qualify.GroupTotal
}

// finished is a record with the printed name of who started it.
type finished struct {
	Record qualify.Record
	By     string
}

// state is what there is to show at one moment.
type state struct {
	Now  *progress // nil while none runs
	Last *finished // nil until one has finished
	// Broken is when the newest run began if that one did not finish.
	Broken time.Time
}

// qualification runs one qualification at a time and keeps the last record.
type qualification struct {
	run Runner
	log *slog.Logger

	mu      sync.Mutex
	shown   state
	cancel  context.CancelFunc // of the one that runs
	closed  bool
	running sync.WaitGroup
}

// state returns a copy that stays as it is.
func (q *qualification) state() state {
	q.mu.Lock()
	defer q.mu.Unlock()
	s := q.shown
	if s.Now != nil {
		now := *s.Now
		now.Groups = slices.Clone(now.Groups)
		s.Now = &now
	}
	return s
}

// start begins a qualification unless one runs already. It is false when the program
// is stopping. The work outlives the request: who closes the page still gets a record.
func (q *qualification) start(ctx context.Context, by string, at time.Time) bool {
	q.mu.Lock()
	defer q.mu.Unlock()
	if q.closed {
		return false
	}
	if q.shown.Now != nil {
		return true
	}
	ctx, q.cancel = context.WithCancel(context.WithoutCancel(ctx))
	q.shown.Now = &progress{Began: at, By: by}
	q.running.Go(func() { q.work(ctx) })
	return true
}

func (q *qualification) work(ctx context.Context) {
	record, err := q.report(ctx)
	q.mu.Lock()
	defer q.mu.Unlock()
	now := q.shown.Now
	q.shown.Now = nil
	switch {
	case err == nil:
		q.shown.Last, q.shown.Broken = &finished{record, now.By}, time.Time{}
	case ctx.Err() == nil:
		q.shown.Broken = now.Began
		q.log.LogAttrs(ctx, slog.LevelError, "the qualification did not finish", slog.String("error", err.Error()))
	}
	q.cancel()
}

// report runs the qualification. It computes on what may be an unsound machine, so a
// panic in it is a finding and must not take the program down.
func (q *qualification) report(ctx context.Context) (r qualify.Record, err error) {
	defer func() {
		if v := recover(); v != nil {
			err = fmt.Errorf("panic: %v\n%s", v, debug.Stack())
		}
	}()
	return q.run(ctx, qualify.Options{
		Each: func(qualify.Result) {
			q.mu.Lock()
			defer q.mu.Unlock()
			q.shown.Now.Values++
		},
		Group: func(g qualify.GroupTotal) {
			q.mu.Lock()
			defer q.mu.Unlock()
			q.shown.Now.Groups = append(q.shown.Now.Groups, g)
		},
	})
}

func (q *qualification) close() {
	q.mu.Lock()
	q.closed = true
	if q.cancel != nil {
		q.cancel()
	}
	q.mu.Unlock()
	q.running.Wait()
}
