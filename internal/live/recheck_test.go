package live

import (
	"context"
	"sync/atomic"
	"testing"
)

// TestARecheckDuringAnotherIsNotLost: the question under way may have been answered before
// the session ended, so it is asked once more.
func TestARecheckDuringAnotherIsNotLost(t *testing.T) {
	t.Parallel()
	asked, answer := make(chan struct{}, 100), make(chan struct{})
	var over atomic.Bool
	opt := calm()
	opt.Recheck = func(_ context.Context, sessions []string) ([]string, error) {
		ended := over.Load()
		asked <- struct{}{}
		<-answer
		if ended {
			return sessions, nil
		}
		return nil, nil
	}
	s := serve(t, newPlant().render, opt)
	a := s.open(t, "topic=board&session=a")
	a.nextOf("state")
	s.hub.Recheck()
	<-asked // and it has seen a session that goes on
	over.Store(true)
	s.hub.Recheck()
	close(answer)
	if code := a.closed(); code != SessionEnded.Code {
		t.Errorf("close code %d; want %d", code, SessionEnded.Code)
	}
}
