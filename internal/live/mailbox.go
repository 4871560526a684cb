package live

import (
	"sync"

	"github.com/gorilla/websocket"
)

// waiting is what one client has not been sent yet of one topic. While a single
// bundle waits it is kept whole, so that the prepared bytes can be used. As soon
// as a second one comes they are merged by fragment: the newest state of each,
// never a backlog.
type waiting struct {
	bundle *bundle
	merged map[string]*fragment
	full   bool
	stale  bool // to be told after the fragments, if any
}

// mailbox is what stands between the hub, which never waits, and one client's
// writer, which may. It holds at most one state of each fragment.
type mailbox struct {
	mu     sync.Mutex
	order  []string // topics in the order in which they began to wait
	topics map[string]*waiting
	wake   chan struct{} // holds one token while something may be waiting
}

func newMailbox() *mailbox {
	return &mailbox{topics: make(map[string]*waiting), wake: make(chan struct{}, 1)}
}

// put leaves a bundle and reports whether it was merged with one not yet sent.
func (m *mailbox) put(b *bundle) (merged bool) {
	m.mu.Lock()
	w, had := m.at(b.topic)
	w.stale = false
	switch {
	case b.full || (w.bundle == nil && w.merged == nil):
		// A full state replaces whatever waits.
		merged = had && (w.bundle != nil || w.merged != nil)
		w.bundle, w.merged, w.full = b, nil, b.full
	default:
		if w.merged == nil {
			w.merged = make(map[string]*fragment, len(w.bundle.frags)+len(b.frags))
			for _, f := range w.bundle.frags {
				w.merged[f.id] = f
			}
			w.bundle = nil
		}
		for _, f := range b.frags {
			w.merged[f.id] = f
		}
		merged = true
	}
	m.mu.Unlock()
	m.signal()
	return merged
}

// putStale leaves word that the topic cannot be rendered at present.
func (m *mailbox) putStale(topic string) {
	m.mu.Lock()
	w, _ := m.at(topic)
	w.stale = true
	m.mu.Unlock()
	m.signal()
}

func (m *mailbox) at(topic string) (w *waiting, had bool) {
	w, had = m.topics[topic]
	if !had {
		w = &waiting{}
		m.topics[topic] = w
		m.order = append(m.order, topic)
	}
	return w, had
}

func (m *mailbox) signal() {
	select {
	case m.wake <- struct{}{}:
	default:
	}
}

// take removes what waits for the topic that has waited longest, and leaves a
// token when there is more.
func (m *mailbox) take() (topic string, w *waiting, ok bool) {
	m.mu.Lock()
	defer m.mu.Unlock()
	if len(m.order) == 0 {
		return "", nil, false
	}
	topic = m.order[0]
	m.order = m.order[1:]
	w = m.topics[topic]
	delete(m.topics, topic)
	if len(m.order) > 0 {
		m.signal()
	}
	return topic, w, true
}

// held counts the fragments that wait.
func (m *mailbox) held() int {
	m.mu.Lock()
	defer m.mu.Unlock()
	n := 0
	for _, w := range m.topics {
		if w.bundle != nil {
			n += len(w.bundle.frags)
		}
		n += len(w.merged)
	}
	return n
}

// messages gives what to write for one topic, in order.
func (w *waiting) messages(topic string) []*websocket.PreparedMessage {
	var out []*websocket.PreparedMessage
	switch {
	case w.bundle != nil:
		out = append(out, w.bundle.message)
	case w.merged != nil:
		out = append(out, prepare(encodeState(topic, w.full, sortedByVersion(w.merged))))
	}
	if w.stale {
		out = append(out, prepare(encodeStale(topic)))
	}
	return out
}
