package relay

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"os"
	"path/filepath"
	"slices"
	"sync"
	"time"

	"golang.org/x/sys/unix"
)

// MostHeld is how many messages may wait in memory while the disk takes none.
const MostHeld = 1000

// compactAt is the size beyond which the file is written anew without what is done.
const compactAt = 1 << 20

// mostMarks is how many messages of one source are known again.
const mostMarks = 64

// ErrFull is what Spool answers when it can keep no more.
var ErrFull = errors.New("there is no room to keep this")

// Message is one request to the server. Its number stands in its body.
type Message struct {
	ID   string          `json:"id"`
	Path string          `json:"path"` // below /api/v1/
	Body json.RawMessage `json:"body"`
}

// Reading is one reading that waits for the rest of its subgroup, whose round gets the
// number of the first of its readings: so a round that is made again after a crash is the
// same round.
type Reading struct {
	ID     string    `json:"id"`
	Number string    `json:"number"`
	At     time.Time `json:"at"`
	Stream string    `json:"stream,omitempty"`
	Lot    string    `json:"lot,omitempty"` // that ran when it came
}

// record is one line of the file.
type record struct {
	Source  string   `json:"source,omitempty"`
	Mark    string   `json:"mark,omitempty"` // by which a repeated line is known
	Reading *Reading `json:"reading,omitempty"`
	Put     *Message `json:"put,omitempty"`
	Ends    bool     `json:"ends,omitempty"` // what waited of the source became a message
	Done    string   `json:"done,omitempty"`
	Lot     *string  `json:"lot,omitempty"` // that runs from now on, as its topic says
}

// file is what the spool needs of one; tests put a disk that is full in its place.
type file interface {
	io.Writer
	Sync() error
	Truncate(size int64) error
	Close() error
}

// Spool keeps what is to be sent, in an append-only file that is flushed after each
// record. It is safe for concurrent use.
type Spool struct {
	// Strict refuses what the disk does not take, instead of holding it in memory: for
	// who can have it sent again.
	Strict bool

	log  *slog.Logger
	path string
	lock *os.File

	mu      sync.Mutex
	refused int // rounds
	file    file
	size    int64
	failing bool
	pending []Message
	held    map[string]record // pending, and not on the disk
	partial map[string][]Reading
	loose   map[string]int // readings of a source that are not on the disk
	marks   map[string][]string
	lots    map[string]string // by topic
	more    chan struct{}
}

// OpenSpool opens the file, or makes it. One process uses it at a time. A last line that
// was torn when the machine went down was not acknowledged to anybody and is cut off.
func OpenSpool(path string, log *slog.Logger) (*Spool, error) {
	lock, err := os.OpenFile(path+".lock", os.O_CREATE|os.O_RDWR, 0o600)
	if err != nil {
		return nil, fmt.Errorf("open the spool: %w", err)
	}
	if err := unix.Flock(int(lock.Fd()), unix.LOCK_EX|unix.LOCK_NB); err != nil {
		_ = lock.Close()
		return nil, fmt.Errorf("the spool %s is used by another process: %w", path, err)
	}
	s := &Spool{log: log, path: path, lock: lock, held: map[string]record{}, partial: map[string][]Reading{}, loose: map[string]int{},
		marks: map[string][]string{}, lots: map[string]string{}, more: make(chan struct{}, 1)}
	if err := s.load(); err != nil {
		_ = lock.Close()
		return nil, err
	}
	return s, nil
}

func (s *Spool) load() error {
	body, err := os.ReadFile(s.path)
	if err != nil && !errors.Is(err, os.ErrNotExist) {
		return fmt.Errorf("read the spool: %w", err)
	}
	for n := 1; ; n++ {
		line, rest, whole := bytes.Cut(body[s.size:], []byte("\n"))
		if !whole {
			break
		}
		var r record
		if err := json.Unmarshal(line, &r); err != nil {
			return fmt.Errorf("line %d of the spool %s cannot be read; put the file aside for a person: %w", n, s.path, err)
		}
		s.apply(r)
		s.size = int64(len(body) - len(rest))
	}
	f, err := os.OpenFile(s.path, os.O_CREATE|os.O_WRONLY|os.O_APPEND, 0o600)
	if err != nil {
		return fmt.Errorf("open the spool: %w", err)
	}
	s.file = f
	if err := f.Truncate(s.size); err != nil {
		return errors.Join(fmt.Errorf("cut off a torn line of the spool: %w", err), f.Close())
	}
	return syncFolder(s.path)
}

func syncFolder(path string) error {
	d, err := os.Open(filepath.Dir(path))
	if err != nil {
		return fmt.Errorf("open the folder of the spool: %w", err)
	}
	return errors.Join(d.Sync(), d.Close())
}

// apply is what a record means.
func (s *Spool) apply(r record) {
	if r.Mark != "" {
		m := append(s.marks[r.Source], r.Mark)
		s.marks[r.Source] = m[max(0, len(m)-mostMarks):]
	}
	if r.Ends {
		delete(s.partial, r.Source)
		delete(s.loose, r.Source)
	}
	if r.Reading != nil {
		s.partial[r.Source] = append(s.partial[r.Source], *r.Reading)
	}
	if r.Put != nil {
		s.pending = append(s.pending, *r.Put)
	}
	if r.Done != "" {
		s.pending = slices.DeleteFunc(s.pending, func(m Message) bool { return m.ID == r.Done })
		delete(s.held, r.Done)
	}
	if r.Lot != nil {
		s.lots[r.Source] = *r.Lot
	}
}

// append writes one record and flushes it. Of one that could not be written whole
// nothing stays in the file.
func (s *Spool) append(r record) error {
	line, err := json.Marshal(r)
	if err != nil {
		return fmt.Errorf("encode a record of the spool: %w", err)
	}
	line = append(line, '\n')
	_, err = s.file.Write(line)
	if err == nil {
		err = s.file.Sync()
	}
	if err != nil {
		if !s.failing {
			s.failing = true
			s.log.Error("the spool cannot be written: is the disk full? What is on it stays", "file", s.path, "error", err)
		}
		return errors.Join(fmt.Errorf("write the spool: %w", err), s.file.Truncate(s.size))
	}
	if s.failing {
		s.failing = false
		s.log.Info("the spool can be written again", "file", s.path)
	}
	s.size += int64(len(line))
	return nil
}

// Seen reports whether a message of a source was taken under this mark, lately. With
// last, only the newest counts.
func (s *Spool) Seen(source, mark string, last bool) bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	m := s.marks[source]
	if last {
		return len(m) > 0 && m[len(m)-1] == mark
	}
	return slices.Contains(m, mark)
}

// Add keeps a reading until its subgroup is whole and returns those of the source that
// wait. durable says that it is on the disk.
func (s *Spool) Add(source, mark string, r Reading) (waiting []Reading, durable bool, err error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	rec := record{Source: source, Mark: mark, Reading: &r}
	if err := s.append(rec); err != nil {
		if s.Strict || s.loose[source] >= MostHeld {
			return nil, false, errors.Join(ErrFull, err)
		}
		s.loose[source]++
	} else {
		durable = true
	}
	s.apply(rec)
	return slices.Clone(s.partial[source]), durable, nil
}

// Waiting lists the readings of a source that wait for the rest of their subgroup.
func (s *Spool) Waiting(source string) []Reading {
	s.mu.Lock()
	defer s.mu.Unlock()
	return slices.Clone(s.partial[source])
}

// Put keeps a message until it is done. With ends it is what the waiting readings of the
// source became. durable says that it is on the disk.
func (s *Spool) Put(source, mark string, ends bool, m Message) (durable bool, err error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	rec := record{Source: source, Mark: mark, Put: &m, Ends: ends}
	if err := s.append(rec); err != nil {
		if s.Strict || len(s.held) >= MostHeld {
			return false, errors.Join(ErrFull, err)
		}
		s.held[m.ID] = rec
	} else {
		durable = true
	}
	s.apply(rec)
	s.tell()
	return durable, nil
}

// Next gives the oldest message that is not done and not put off; nil puts off none.
func (s *Spool) Next(putOff func(id string) bool) (Message, bool) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, m := range s.pending {
		if putOff == nil || !putOff(m.ID) {
			return m, true
		}
	}
	return Message{}, false
}

// Len is how many messages wait.
func (s *Spool) Len() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	return len(s.pending)
}

func (s *Spool) tell() {
	select {
	case s.more <- struct{}{}:
	default:
	}
}

// SetLot keeps the order or lot that a topic says runs from now on; Lot gives it.
func (s *Spool) SetLot(topic, lot string) error {
	s.mu.Lock()
	defer s.mu.Unlock()
	if s.lots[topic] == lot {
		return nil
	}
	rec := record{Source: topic, Lot: &lot}
	if err := s.append(rec); err != nil {
		return errors.Join(ErrFull, err)
	}
	s.apply(rec)
	return nil
}

// Lot is the lot that a topic said last, "" when it has said none.
func (s *Spool) Lot(topic string) string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.lots[topic]
}

// More tells that something was put since it was read last.
func (s *Spool) More() <-chan struct{} { return s.more }

// Close lets go of the file.
func (s *Spool) Close() error { return errors.Join(s.file.Close(), s.lock.Close()) }
