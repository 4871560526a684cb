package live

import (
	"context"
	"errors"
	"slices"
	"strconv"
	"sync/atomic"
	"testing"
	"time"
)

func TestClientIsGreetedAndGivenTheFullStateFirst(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane-1", "steady")
	p.set("board", "lane-2", "a < b & c")
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=board")

	hello := b.next()
	if hello.Type != "hello" || hello.Epoch == "" || hello.Beat != 5000 {
		t.Errorf("first message = %+v; want a hello with epoch and beat 5000", hello)
	}
	m := b.next()
	if m.Type != "state" || m.Topic != "board" || !m.Full || len(m.Fragments) != 2 {
		t.Fatalf("second message = %+v; want the full state of the board", m)
	}
	if m.text("lane-1") != "steady" || m.text("lane-2") != "a < b & c" {
		t.Errorf("fragments = %+v", m.Fragments)
	}
	if v := m.Fragments; v[0].V >= v[1].V {
		t.Errorf("versions %d, %d do not grow", v[0].V, v[1].V)
	}
}

func TestTopicWithoutFragmentsStillGetsAState(t *testing.T) {
	t.Parallel()
	s := serve(t, newPlant().render, calm())
	b := s.open(t, "topic=station/none")
	if m := b.nextOf("state"); !m.Full || len(m.Fragments) != 0 {
		t.Errorf("state = %+v; want full and empty", m)
	}
}

func TestOneRenderingForAllWhoWatch(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", "0")
	s := serve(t, p.render, calm())
	var all []browser
	for i := range 20 {
		b := s.open(t, "topic=board&session=s"+strconv.Itoa(i))
		b.nextOf("state")
		all = append(all, b)
	}
	before := len(p.asked())
	p.set("board", "lane", "1")
	s.hub.Dirty("board", "nobody/watches/this")
	for _, b := range all {
		if m := b.nextOf("state"); m.Full || m.text("lane") != "1" {
			t.Errorf("state = %+v; want the changed lane alone", m)
		}
	}
	calls := p.asked()[before:]
	if len(calls) != 1 || !slices.Equal(calls[0], []string{"board"}) {
		t.Errorf("renderer was asked %v; want once, for the board", calls)
	}
}

func TestTopicsMarkedTogetherAreRenderedTogether(t *testing.T) {
	t.Parallel()
	p := newPlant()
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=a&topic=b&topic=c&topic=a")
	for range 3 {
		b.nextOf("state")
	}
	before := len(p.asked())
	for _, name := range []string{"a", "b", "c"} {
		p.set(name, name+"1", "new")
	}
	s.hub.Dirty("c", "a", "b")
	got := map[string]bool{}
	for range 3 {
		got[b.nextOf("state").Topic] = true
	}
	if len(got) != 3 {
		t.Errorf("states came for %v; want a, b and c", got)
	}
	if calls := p.asked()[before:]; len(calls) != 1 || len(calls[0]) != 3 {
		t.Errorf("renderer was asked %v; want once for three topics", calls)
	}
}

func TestUnchangedFragmentsAreNotSent(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "still", "x")
	p.set("board", "moving", "0")
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=board")
	first := b.nextOf("state")

	s.hub.Dirty("board") // nothing changed: nothing may be sent for this
	p.set("board", "moving", "1")
	s.hub.Dirty("board")
	m := b.nextOf("state")
	if len(m.Fragments) != 1 || m.text("moving") != "1" {
		t.Errorf("state = %+v; want the moving fragment alone", m)
	}
	if m.Fragments[0].V <= first.Fragments[1].V {
		t.Errorf("version %d is not newer than %d", m.Fragments[0].V, first.Fragments[1].V)
	}
	if st := s.hub.Stats(); st.Unchanged == 0 || st.Changed != 3 {
		t.Errorf("stats = %+v; want 3 changed and some unchanged", st)
	}
}

func TestLateJoinerGetsTheStateRenderedAfterItJoined(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", "old")
	s := serve(t, p.render, calm())
	first := s.open(t, "topic=board")
	first.nextOf("state")
	p.set("board", "lane", "new") // committed, but nobody has said so yet
	second := s.open(t, "topic=board")
	if m := second.nextOf("state"); !m.Full || m.text("lane") != "new" {
		t.Errorf("late joiner got %+v; want the full new state", m)
	}
	if m := first.nextOf("state"); m.Full || m.text("lane") != "new" {
		t.Errorf("earlier watcher got %+v; want the change", m)
	}
}

func TestWatchedTopicsAreRefreshedWithTheClock(t *testing.T) {
	t.Parallel()
	var calls atomic.Int64
	render := func(context.Context, []string) (map[string][]Fragment, error) {
		age := strconv.FormatInt(calls.Add(1), 10)
		return map[string][]Fragment{"board": {{ID: "age", HTML: []byte("<p id=age>" + age + "</p>")}}}, nil
	}
	opt := calm()
	opt.RefreshEvery = 5 * time.Millisecond
	b := serve(t, render, opt).open(t, "topic=board")
	for range 4 {
		b.nextOf("state")
	}
}

func TestFailedRenderingIsToldAndRetried(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", "0")
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=board")
	b.nextOf("state")

	p.failing("board", errors.New("the database is away"))
	p.set("board", "lane", "1")
	s.hub.Dirty("board")
	if m := b.nextOf("stale"); m.Topic != "board" {
		t.Errorf("stale = %+v", m)
	}
	p.failing("board", nil) // nobody marks it again: the hub must have kept it
	if m := b.nextOf("state"); m.text("lane") != "1" {
		t.Errorf("state after the failure = %+v", m)
	}
	if st := s.hub.Stats(); st.RenderErrors == 0 {
		t.Errorf("stats = %+v; want render errors counted", st)
	}
}

func TestStaleEndsEvenWhenNothingChanged(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("board", "lane", "0")
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=board")
	b.nextOf("state")
	p.failing("board", errors.New("away"))
	s.hub.Dirty("board")
	b.nextOf("stale")
	p.failing("board", nil)
	if m := b.nextOf("state"); len(m.Fragments) != 0 {
		t.Errorf("state = %+v; want one without fragments", m)
	}
}

func TestOneBadTopicDoesNotStopTheOthers(t *testing.T) {
	t.Parallel()
	p := newPlant()
	p.set("good", "g", "0")
	p.failing("bad", errors.New("cannot be drawn"))
	s := serve(t, p.render, calm())
	b := s.open(t, "topic=good&topic=bad")
	if m := b.nextOf("state"); m.Topic != "good" {
		t.Fatalf("state = %+v; want the good topic", m)
	}
	p.set("good", "g", "1")
	s.hub.Dirty("good", "bad")
	if m := b.nextOf("state"); m.text("g") != "1" {
		t.Errorf("state = %+v", m)
	}
}

func TestPanickingOrDoubledRenderingIsAnError(t *testing.T) {
	t.Parallel()
	for name, broken := range map[string]Renderer{
		"panic": func(context.Context, []string) (map[string][]Fragment, error) { panic("broken page") },
		"same id twice": func(context.Context, []string) (map[string][]Fragment, error) {
			return map[string][]Fragment{"x": {{ID: "a", HTML: []byte("1")}, {ID: "a", HTML: []byte("2")}}}, nil
		},
	} {
		t.Run(name, func(t *testing.T) {
			t.Parallel()
			var calls atomic.Int64
			s := serve(t, func(ctx context.Context, topics []string) (map[string][]Fragment, error) {
				if calls.Add(1) == 1 {
					return broken(ctx, topics)
				}
				return map[string][]Fragment{"x": {{ID: "a", HTML: []byte("<p id=a>fine</p>")}}}, nil
			}, calm())
			b := s.open(t, "topic=x")
			if m := b.nextOf("state"); len(m.Fragments) != 1 {
				t.Errorf("state = %+v", m)
			}
		})
	}
}
