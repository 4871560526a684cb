package relay

import (
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"
)

// Source is a gauge or a topic that tells single readings of one characteristic.
type Source struct {
	Pattern
	Characteristic string // id or name
	Station        string // Nil or "" where the sender belongs to one
	Size           int    // readings of a subgroup
	// Within is how long a subgroup may take. What came longer ago is sent as a short
	// subgroup, since it does not belong to what comes now.
	Within time.Duration
}

// Gather brings the readings of a source into rounds.
type Gather struct {
	Source
	Spool *Spool
	Now   func() time.Time
}

// Take takes one line. An error means that it could not be kept at all. durable says
// that everything is on the disk. mark tells a repeated delivery from a second reading;
// "" makes every line a reading.
func (g *Gather) Take(text, mark string) (durable bool, err error) {
	now := g.Now()
	line, err := g.Parse(text)
	if err != nil {
		return g.bad(text, err, mark, now)
	}
	if line.Sequence != "" {
		if mark = line.Sequence; g.Spool.Seen(g.Characteristic, mark, true) {
			return true, nil // the gauge has sent it twice
		}
	}
	if err := g.Flush(); err != nil {
		return false, err
	}
	waiting, durable, err := g.Spool.Add(g.Characteristic, mark, Reading{ID: uuid.Must(uuid.NewV7()).String(), Number: line.Number, At: now})
	if err != nil || len(waiting) < g.Size {
		return durable, err
	}
	return g.send(waiting, "")
}

// Flush sends the waiting readings that do not belong to what comes now: a whole subgroup
// that a crash or a full disk left behind, or one that was begun too long ago.
func (g *Gather) Flush() error {
	waiting := g.Spool.Waiting(g.Characteristic)
	var err error
	switch {
	case len(waiting) == 0:
	case len(waiting) >= g.Size:
		_, err = g.send(waiting, "")
	case g.Within > 0 && g.Now().Sub(waiting[0].At) > g.Within:
		_, err = g.send(waiting, "other")
	}
	return err
}

func (g *Gather) send(readings []Reading, short string) (durable bool, err error) {
	numbers := make([]string, len(readings))
	for i, r := range readings {
		numbers[i] = r.Number
	}
	entry := map[string]any{"characteristic": g.Characteristic, "unit": g.Unit, "readings": numbers}
	if short != "" {
		entry["short"] = short
	}
	return g.put("", true, "rounds", readings[0].ID, map[string]any{"taken_at": readings[len(readings)-1].At.Format(time.RFC3339Nano), "entries": []any{entry}})
}

func (g *Gather) bad(text string, why error, mark string, now time.Time) (bool, error) {
	return g.put(mark, false, "lines", uuid.Must(uuid.NewV7()).String(), map[string]any{"characteristic": g.Characteristic, "line": text, "why": why.Error(), "at": now.Format(time.RFC3339Nano)})
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
	return g.Spool.Put(g.Characteristic, mark, ends, Message{ID: id, Path: path, Body: b})
}
