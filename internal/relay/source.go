package relay

import (
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"
)

func newNumber() string { return uuid.Must(uuid.NewV7()).String() }

// Source is a gauge or a topic that tells single readings of one characteristic. Several
// topics may fill the same subgroup, one for each stream.
type Source struct {
	Pattern
	Characteristic string // id or name
	Station        string // Nil or "" where the sender belongs to one
	Size           int    // readings of a subgroup
	// Streams are the machine's streams that the readings come from: none, one for all of
	// them, or one for each reading of a subgroup in the order in which they are told.
	Streams []string
	// Within is how long a subgroup may take. What came longer ago is sent as a short
	// subgroup, since it does not belong to what comes now.
	Within time.Duration
	// Fits says why the server cannot take a number as a reading: ErrNumber or ErrDecimals;
	// nil: that is not known. A number that it would refuse must not take a subgroup with it.
	Fits func(number string) error
}

// Check reports what in a source cannot be.
func (s Source) Check() error {
	switch n := len(s.Streams); {
	case s.Characteristic == "" || s.Unit == "":
		return fmt.Errorf("name the characteristic and its unit")
	case s.Size < 1 || s.Size > 25:
		return fmt.Errorf("a subgroup has 1 to 25 readings")
	case n > 1 && n != s.Size:
		return fmt.Errorf("there are %d streams for %d readings: name one for each, in their order, or one for all", n, s.Size)
	}
	return nil
}

// key is the name under which the spool keeps what waits of the source.
func (s Source) key() string {
	if s.Station == "" {
		return s.Characteristic
	}
	return s.Station + " " + s.Characteristic
}

// Gather brings the readings of a source into rounds.
type Gather struct {
	Source
	Spool *Spool
	Now   func() time.Time
	Lot   func() string // order or lot that runs now; nil or "": the server knows
}

func (g *Gather) lot() string {
	if g.Lot == nil {
		return ""
	}
	return g.Lot()
}

// Take takes one line. An error means that it could not be kept at all. durable says
// that everything is on the disk. mark tells a repeated delivery from a second reading;
// "" makes every line a reading.
func (g *Gather) Take(text, mark string) (durable bool, err error) {
	now := g.Now()
	line, err := g.Parse(text)
	if err == nil && g.Fits != nil {
		err = g.Fits(line.Number)
	}
	if err != nil {
		return g.bad(text, err, mark, now)
	}
	if line.Sequence != "" {
		if mark = line.Sequence; g.Spool.Seen(g.key(), mark, true) {
			return true, nil // the gauge has sent it twice
		}
	}
	lot := g.lot()
	if err := g.flush(&lot); err != nil {
		return false, err
	}
	r := Reading{ID: newNumber(), Number: line.Number, At: now, Lot: lot}
	if len(g.Streams) == 1 {
		r.Stream = g.Streams[0]
	}
	waiting, durable, err := g.Spool.Add(g.key(), mark, r)
	if err != nil || len(waiting) < g.Size {
		return durable, err
	}
	return g.send(waiting, "")
}

// Waiting is how many readings wait for the rest of their subgroup.
func (g *Gather) Waiting() int { return len(g.Spool.Waiting(g.key())) }

// Flush sends the waiting readings that do not belong to what comes now: a whole subgroup
// that a crash or a full disk left behind, or one that was begun too long ago.
func (g *Gather) Flush() error { return g.flush(nil) }

// flush is Flush before a reading of a lot, which does not belong to another lot's.
func (g *Gather) flush(lot *string) error {
	waiting := g.Spool.Waiting(g.key())
	var err error
	switch {
	case len(waiting) == 0:
	case len(waiting) >= g.Size:
		_, err = g.send(waiting, "")
	case g.Within > 0 && g.Now().Sub(waiting[0].At) > g.Within, lot != nil && *lot != waiting[0].Lot:
		_, err = g.send(waiting, "other")
	}
	return err
}

func (g *Gather) send(readings []Reading, short string) (durable bool, err error) {
	numbers, streams := make([]string, len(readings)), make([]string, 0, len(readings))
	for i, r := range readings {
		numbers[i] = r.Number
		if len(g.Streams) > 1 && i < len(g.Streams) {
			r.Stream = g.Streams[i]
		}
		if r.Stream != "" {
			streams = append(streams, r.Stream)
		}
	}
	entry := map[string]any{"characteristic": g.Characteristic, "unit": g.Unit, "readings": numbers}
	if short != "" {
		entry["short"] = short
	}
	if len(streams) == len(numbers) {
		entry["streams"] = streams
	}
	body := map[string]any{"taken_at": readings[len(readings)-1].At.Format(time.RFC3339Nano), "entries": []any{entry}}
	if lot := readings[0].Lot; lot != "" {
		body["lot"] = lot
	}
	return g.put("", true, "rounds", readings[0].ID, body)
}

func (g *Gather) bad(text string, why error, mark string, now time.Time) (bool, error) {
	return g.put(mark, false, "lines", newNumber(), map[string]any{"characteristic": g.Characteristic, "line": text, "why": why.Error(), "at": now.Format(time.RFC3339Nano)})
}

func (g *Gather) put(mark string, ends bool, path, id string, body map[string]any) (bool, error) {
	body["id"] = id
	if g.Station != "" {
		body["station"] = g.Station
	}
	b, err := json.Marshal(body)
	if err != nil {
		return false, fmt.Errorf("encode a message: %w", err)
	}
	return g.Spool.Put(g.key(), mark, ends, Message{ID: id, Path: path, Body: b})
}
