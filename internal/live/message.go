package live

import (
	"bytes"
	"cmp"
	"encoding/json"
	"fmt"
	"maps"
	"slices"
	"strconv"
	"time"

	"github.com/gorilla/websocket"
)

// Fragment is one element of a page. HTML is the whole element, whose id
// attribute equals ID. The hub keeps HTML and compares it byte by byte with
// what comes next, so it must not be written to afterwards.
type Fragment struct {
	ID   string
	HTML []byte
}

// fragment is the newest state of one element as the hub keeps it. It is never
// changed once made, so clients may hold it without a lock.
type fragment struct {
	id      string
	version uint64
	html    []byte
	encoded []byte // its JSON object, made once however many messages carry it
}

func newFragment(id string, version uint64, html []byte) (*fragment, error) {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	enc.SetEscapeHTML(false) // the text never stands inside HTML, and < as six bytes doubles a page
	err := enc.Encode(struct {
		ID      string `json:"id"`
		Version uint64 `json:"v"`
		HTML    string `json:"html"`
	}{id, version, string(html)})
	if err != nil {
		return nil, fmt.Errorf("encode fragment %q: %w", id, err)
	}
	return &fragment{id: id, version: version, html: html, encoded: bytes.TrimSuffix(b.Bytes(), []byte("\n"))}, nil
}

// encodeState writes a state message; the fragments go in order of version.
func encodeState(topic string, full bool, frags []*fragment) []byte {
	name, _ := json.Marshal(topic) // a string always encodes
	size := len(name) + 64
	for _, f := range frags {
		size += len(f.encoded) + 1
	}
	b := make([]byte, 0, size)
	b = append(b, `{"type":"state","topic":`...)
	b = append(b, name...)
	if full {
		b = append(b, `,"full":true`...)
	}
	b = append(b, `,"fragments":[`...)
	for i, f := range frags {
		if i > 0 {
			b = append(b, ',')
		}
		b = append(b, f.encoded...)
	}
	return append(b, `]}`...)
}

func encodeHello(epoch string, beat time.Duration) []byte {
	return []byte(`{"type":"hello","epoch":` + strconv.Quote(epoch) + `,"beat":` + strconv.FormatInt(beat.Milliseconds(), 10) + `}`)
}

func encodeStale(topic string) []byte {
	name, _ := json.Marshal(topic)
	return append(append([]byte(`{"type":"stale","topic":`), name...), '}')
}

func prepare(data []byte) *websocket.PreparedMessage {
	m, err := websocket.NewPreparedMessage(websocket.TextMessage, data)
	if err != nil { // it writes to memory and refuses nothing but an unknown message type
		panic("live: prepare a message: " + err.Error())
	}
	return m
}

// bundle is what one rendering changed in one topic, encoded once for all.
type bundle struct {
	topic   string
	full    bool
	frags   []*fragment
	message *websocket.PreparedMessage
}

func newBundle(topic string, full bool, frags []*fragment) *bundle {
	slices.SortFunc(frags, byVersion)
	return &bundle{topic: topic, full: full, frags: frags, message: prepare(encodeState(topic, full, frags))}
}

func byVersion(a, b *fragment) int { return cmp.Compare(a.version, b.version) }

func sortedByVersion(frags map[string]*fragment) []*fragment {
	return slices.SortedFunc(maps.Values(frags), byVersion)
}
