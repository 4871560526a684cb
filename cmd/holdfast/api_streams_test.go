package main

import (
	"context"
	"encoding/json"
	"fmt"
	"slices"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
	"holdfast/web/api"
)

// spindles gives the lathe two spindles and one that is retired.
func (r *running) spindles(t *testing.T) (one, two plant.Stream) {
	t.Helper()
	m := r.Machine
	one, two = plant.Stream{ID: storetest.ID(), Name: "spindle 1"}, plant.Stream{ID: storetest.ID(), Name: "spindle 2"}
	for _, streams := range [][]plant.Stream{{one, two, {ID: storetest.ID(), Name: "spindle 3"}}, {one, two}} {
		m.Streams = streams
		if err := r.ChangeMachine(context.Background(), m, uuid.Nil); err != nil {
			t.Fatal(err)
		}
	}
	return one, two
}

func TestARoundSaysItsLotAndStreams(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := context.Background()
	v := r.visit(t, "")
	_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	one, two := r.spindles(t)
	if _, body := v.get("/api/v1/station"); !strings.Contains(body, `"streams":["spindle 1","spindle 2"]`) {
		t.Errorf("the station as a sender sees it: %s", body)
	}
	round := func(lot string, streams ...string) map[string]any {
		r.Clock.Advance(time.Second)
		e := map[string]any{"characteristic": r.Diameter.Name, "unit": "mm", "readings": []any{"14.991", "14.990", nil, "14.99", "14.992"}, "short": "part lost"}
		if streams != nil {
			e["streams"] = streams
		}
		return map[string]any{"id": newNumber(), "taken_at": r.Clock.Now(), "lot": lot, "entries": []any{e}}
	}
	good := round("K-2231", "spindle 1", "spindle 2", "spindle 1", two.ID.String(), "spindle 1")
	told := v.api("rounds", good, 200)
	if again := v.api("rounds", good, 200); again != told {
		t.Errorf("sent again it was told %s, before %s", again, told)
	}
	var lot string
	var streams []uuid.UUID
	if err := r.Pool().QueryRow(ctx, `select lot, streams from subgroup where round_id = $1`, good["id"]).Scan(&lot, &streams); err != nil {
		t.Fatal(err)
	}
	if want := []uuid.UUID{one.ID, two.ID, two.ID, one.ID}; lot != "K-2231" || !slices.Equal(streams, want) {
		t.Errorf("on record: lot %q, streams %v; want %v", lot, streams, want) // the lost part was of spindle 1
	}
	good["lot"] = "K-2232"
	v.api("rounds", good, 409) // another lot under the same number is another round

	for _, c := range []struct {
		field, says string
		round       map[string]any
	}{
		{"entries[0].streams", "There are 2 streams for 5 readings", round("", "spindle 1", "spindle 2")},
		{"entries[0].streams[2]", `has no stream "spindle 9"`, round("", "spindle 1", "spindle 1", "spindle 9", "spindle 1", "spindle 1")},
		{"entries[0].streams[0]", `has no stream "spindle 3"`, round("", "spindle 3", "spindle 1", "spindle 1", "spindle 1", "spindle 1")},
		{"lot", "at most 80 characters", round(strings.Repeat("x", 81))},
	} {
		body := v.api("rounds", c.round, 422)
		var told struct {
			Error struct{ Field, Message string }
		}
		if err := json.Unmarshal([]byte(body), &told); err != nil || told.Error.Field != c.field || !strings.Contains(told.Error.Message, c.says) {
			t.Errorf("told %s; want %s, %s", body, c.field, c.says)
		}
	}
	// A round that is sent again after its stream was retired is the round that it was.
	m := r.Machine
	m.Streams = []plant.Stream{one}
	if err := r.ChangeMachine(ctx, m, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	good["lot"] = "K-2231"
	if again := v.api("rounds", good, 200); again != told {
		t.Errorf("sent again after its stream was retired it was told %s, before %s", again, told)
	}
	if ds, err := r.CheckRecord(ctx); err != nil || len(ds) > 0 {
		t.Errorf("the record differs from the ledger: %v, %v", ds, err)
	}
	// The record itself refuses a stream of another machine, whoever asks.
	strange := r.Round(r.Mass, 120)
	strange.Entries[0].Streams = []uuid.UUID{one.ID}
	if _, err := r.Record(ctx, strange); !plant.IsKind(err, plant.Invalid) {
		t.Errorf("a stream of another machine: %v", err)
	}
}

// What was refused says whether the server keeps it, so that the sender need not.
func TestASenderIsToldWhatWasKept(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "")
	_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Gauge"})
	round := func(station any, unit string) string {
		r.Clock.Advance(time.Second)
		return fmt.Sprintf(`{"id":%q,"station":%q,"taken_at":%q,"entries":[{"characteristic":%q,"unit":%q,"readings":["14.991","14.990","14.991","14.990","14.992"]}]}`,
			newNumber(), station, r.Clock.Now().Format(time.RFC3339Nano), r.Diameter.ID, unit)
	}
	for _, c := range []struct {
		name, body, kept string
		status           int
	}{
		{"taken", round(r.Station.ID, "mm"), "", 200},
		{"in another unit", round(r.Station.ID, "in"), "station", 422},
		{"for no station of ours", round(uuid.New(), "mm"), "record", 422},
		{"too large", `{"id":"` + strings.Repeat("x", 2<<20) + `"}`, "", 413},
	} {
		res, body := v.send("POST", "/api/v1/rounds", "application/json", "*/*", strings.NewReader(c.body))
		if res.StatusCode != c.status || res.Header.Get(api.KeptHeader) != c.kept {
			t.Errorf("%s: %s, kept %q; want %d, %q\n%.300s", c.name, res.Status, res.Header.Get(api.KeptHeader), c.status, c.kept, body)
		}
	}
}
