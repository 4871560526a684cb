package relay

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"os"
	"time"
)

// Refusal is why the server will never take a message.
type Refusal struct {
	Status int    `json:"status"`
	Says   string `json:"says"`
}

// refused is one line of the file of what was refused.
type refused struct {
	At time.Time `json:"at"`
	Refusal
	Message
}

// RefusedFile is where what the server refused is kept for a person, one JSON object a
// line. Nothing reads it again by itself.
func (s *Spool) RefusedFile() string { return s.path + ".refused" }

// Refused is how many rounds were refused since the spool was opened.
func (s *Spool) Refused() int {
	s.mu.Lock()
	defer s.mu.Unlock()
	return s.refused
}

// Refuse puts a message aside that the server will never take, so that what comes after it
// is not held up. instead, when there is one, is sent in its place. When it cannot be put
// aside it stays where it is.
func (s *Spool) Refuse(m Message, why Refusal, at time.Time, instead *Message) error {
	line, err := json.Marshal(refused{at, why, m})
	if err != nil {
		return fmt.Errorf("encode what was refused: %w", err)
	}
	s.mu.Lock()
	defer s.mu.Unlock()
	f, err := os.OpenFile(s.RefusedFile(), os.O_CREATE|os.O_RDWR|os.O_APPEND, 0o600)
	if err != nil {
		return fmt.Errorf("open the file of what was refused: %w", err)
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return fmt.Errorf("look at the file of what was refused: %w", err)
	}
	_, err = f.Write(append(line, '\n'))
	if err == nil {
		err = f.Sync()
	}
	if err != nil { // half a line would spoil the next one
		return errors.Join(fmt.Errorf("put aside what was refused: %w", err), f.Truncate(info.Size()))
	}
	if info.Size() == 0 {
		if err := syncFolder(s.path); err != nil {
			return err
		}
	}
	s.done(m.ID, instead)
	if m.Path == "rounds" {
		s.refused++
	}
	if instead != nil {
		s.tell()
	}
	return nil
}

// Done notes that the server has taken or refused a message. When that cannot be
// written, the message is sent once more after a restart, under the same number.
func (s *Spool) Done(id string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	s.done(id, nil)
}

// done ends a message, and puts another in its place when there is one.
func (s *Spool) done(id string, instead *Message) {
	was := s.held[id]
	r := record{Source: was.Source, Ends: was.Ends, Done: id, Put: instead}
	if err := s.append(r); err != nil && instead != nil { // said in the log
		s.held[instead.ID] = record{Put: instead}
	}
	r.Ends = false
	s.apply(r)
	if s.size > compactAt && s.size > 4*s.live() {
		if err := s.compact(); err != nil {
			s.log.Warn("the spool could not be written anew", "file", s.path, "error", err)
		}
	}
}

func (s *Spool) live() (size int64) {
	for _, m := range s.pending {
		size += int64(len(m.Body))
	}
	return size
}

// compact writes the file anew with what is still needed, beside the old one, and then
// puts it in its place.
func (s *Spool) compact() error {
	var b bytes.Buffer
	enc := json.NewEncoder(&b)
	for source, marks := range s.marks {
		for _, m := range marks {
			_ = enc.Encode(record{Source: source, Mark: m})
		}
	}
	for i := range s.pending {
		if err := enc.Encode(record{Put: &s.pending[i]}); err != nil {
			return err
		}
	}
	for topic, lot := range s.lots {
		_ = enc.Encode(record{Source: topic, Lot: &lot})
	}
	for source, readings := range s.partial {
		for i := range readings {
			_ = enc.Encode(record{Source: source, Reading: &readings[i]})
		}
	}
	f, err := os.OpenFile(s.path+".new", os.O_CREATE|os.O_WRONLY|os.O_TRUNC|os.O_APPEND, 0o600)
	if err != nil {
		return err
	}
	_, err = f.Write(b.Bytes())
	if err == nil {
		err = f.Sync()
	}
	if err == nil {
		err = os.Rename(s.path+".new", s.path)
	}
	if err != nil {
		return errors.Join(err, f.Close())
	}
	_ = s.file.Close()
	s.file, s.size = f, int64(b.Len())
	clear(s.held)
	clear(s.loose)
	return syncFolder(s.path)
}
