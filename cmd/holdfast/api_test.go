package main

import (
	"context"
	"encoding/json"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// api sends JSON as a sender does.
func (v *visitor) api(path string, body any, want int) string {
	v.t.Helper()
	text, ok := body.(string)
	if !ok {
		b, err := json.Marshal(body)
		if err != nil {
			v.t.Fatal(err)
		}
		text = string(b)
	}
	res, got := v.send(http.MethodPost, "/api/v1/"+path, "application/json", "*/*", strings.NewReader(text))
	if res.StatusCode != want || res.Header.Get("Content-Type") != "application/json" {
		v.t.Fatalf("%s: %s %s\n%s\nwant %d", path, res.Status, res.Header.Get("Content-Type"), got, want)
	}
	return got
}

func newNumber() string { return uuid.Must(uuid.NewV7()).String() }

func TestRoundsFromOutside(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := context.Background()
	v := r.visit(t, "")
	device, token := r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	v.token = token
	operator := r.visit(t, "operator1")
	page := "/station/" + r.Station.ID.String()
	shows := func(says ...string) {
		t.Helper()
		_, body := operator.get(page)
		for _, s := range says {
			if !strings.Contains(body, s) {
				t.Fatalf("the station does not show %q", s)
			}
		}
	}
	round := func(entry map[string]any) map[string]any {
		now := r.Clock.Now()
		return map[string]any{"id": newNumber(), "taken_at": now.Add(time.Minute), "sent_at": now.Add(time.Minute), "entries": []any{entry}}
	}
	good := func() map[string]any {
		return map[string]any{"characteristic": r.Diameter.Name, "unit": "mm", "readings": []any{"14.991", "14,990", nil, "14.99", "14.992"}, "short": "part lost"}
	}

	if _, body := v.get("/api/v1/station"); !strings.Contains(body, `"name":"Axle seat diameter"`) || !strings.Contains(body, `"decimals":3`) {
		t.Errorf("the station as a sender sees it: %s", body)
	}

	first := round(good())
	told := v.api("rounds", first, 200)
	var a plant.Answer
	if err := json.Unmarshal([]byte(told), &a); err != nil || a.Verdict != plant.Learning || len(a.Parts) != 1 || !a.TakenAt.Equal(r.Clock.Now()) {
		t.Fatalf("told %s, %v", told, err) // the sender's clock is a minute ahead, and says so
	}
	r.Clock.Advance(time.Minute)
	first["sent_at"] = r.Clock.Now() // the same, sent again after the answer was lost
	if again := v.api("rounds", first, 200); again != told {
		t.Errorf("sent again it was told %s, before %s", again, told)
	}
	var readings []int64
	var source string
	var by uuid.UUID
	if err := r.Pool().QueryRow(ctx, `select s.readings, r.source, r.device_id from subgroup s join round r on r.id = s.round_id where r.id = $1`, a.Round).
		Scan(&readings, &source, &by); err != nil || len(readings) != 4 || readings[2] != 14990 || source != "api" || by != device.ID {
		t.Errorf("on record: %v from %s by %s, %v", readings, source, by, err)
	}

	other := good()
	other["readings"] = []any{"14.991", "14.991", "14.991", "14.991", "14.991"}
	first["entries"] = []any{other}
	v.api("rounds", first, 409)
	shows("1 line not taken", "Bore gauge", "Another round is on record under this number")

	for _, c := range []struct {
		change func(e map[string]any)
		field  string
		shows  string
	}{
		{func(e map[string]any) { e["unit"] = "in" }, "entries[0].unit", "14.991; 14,990; 14.99; 14.992. Axle seat diameter is measured in mm, so"},
		{func(e map[string]any) { delete(e, "unit") }, "entries[0].unit", "State the unit of the readings"},
		{func(e map[string]any) { e["characteristic"] = "Bore" }, "entries[0].characteristic", "This station measures no"},
		{func(e map[string]any) { e["characteristic"] = r.Length.ID }, "entries[0].characteristic", "This station measures no"},
		{func(e map[string]any) { e["readings"] = []any{"14.9915", "1", "1", "1", "1"} }, "entries[0].readings[0]", "with 3 decimals"},
		{func(e map[string]any) { e["readings"] = []any{"1", "1", "1", "1", "1", "1"} }, "entries[0].readings", "There are 6 readings where 5 are asked"},
		{func(e map[string]any) { delete(e, "short") }, "entries[0].short", "Say why there are only 4 of 5 readings"},
		{func(e map[string]any) { e["readings"] = []any{14.991} }, "entries.readings", "Readings are text"},
		{func(e map[string]any) { e["unti"] = "mm\x00" }, "unti", "is not described at /api/v1"},
	} {
		r.Clock.Advance(time.Second)
		e := good()
		c.change(e)
		sent := round(e)
		body := v.api("rounds", sent, 422)
		v.api("rounds", sent, 422) // shown once, however often it is sent
		var told struct {
			Error struct{ Field, Message string }
		}
		if err := json.Unmarshal([]byte(body), &told); err != nil || told.Error.Field != c.field || !strings.Contains(told.Error.Message, c.shows) {
			t.Errorf("told %s; want %s, %s", body, c.field, c.shows)
		}
		st, err := r.StationState(ctx, r.Station.ID, 1)
		if err != nil || st.Aside.Newest[0].Why.Message != told.Error.Message || st.Aside.Newest[0].Device != device.ID {
			t.Errorf("set aside: %+v, %v; told %s", st.Aside.Newest, err, body)
		}
	}
	r.Clock.Advance(time.Second)
	v.api("rounds", "14.991", 422)
	late := round(good())
	late["taken_at"] = r.Clock.Now().Add(-8 * 24 * time.Hour)
	v.api("rounds", late, 422)
	if _, body := r.visit(t, "administrator1").get("/admin/about"); !strings.Contains(body, "Rounds saved: 2, refused: 21,") {
		t.Error("not every refused round is counted")
	}
	v.api("lines", map[string]any{"id": newNumber(), "line": "0.5902 in", "why": "unit"}, 200)
	shows("0.5902 in", "There are older ones")

	// A German tablet says it in German.
	german := r.visit(t, "operator1")
	german.post("/language", url.Values{"language": {"de"}})
	if _, body := german.get(page); !strings.Contains(body, "Ein Messwert kam in einer anderen Einheit") {
		t.Error("what was set aside is not said in German")
	}

	// Clearing takes what was seen and leaves what came since.
	seen := r.Clock.Now()
	r.Clock.Advance(time.Second)
	v.api("lines", map[string]any{"id": newNumber(), "line": "no gauge", "why": "number"}, 200)
	if res, body := operator.post(page+"/not-taken", url.Values{"until": {seen.Format(time.RFC3339Nano)}}); res.StatusCode != http.StatusSeeOther {
		t.Fatalf("clearing: %s\n%s", res.Status, body)
	}
	shows("no gauge")
	if _, body := operator.get(page); strings.Contains(body, "0.5902 in") {
		t.Error("what was cleared is still shown")
	}

	elsewhere := round(good())
	elsewhere["station"] = r.Other.ID
	v.api("rounds", elsewhere, 403)
	if err := r.RevokeDevice(ctx, device.ID, uuid.Nil); err != nil {
		t.Fatal(err)
	}
	r.program.devices.Forget()
	v.api("rounds", round(good()), 401)
	tablet := r.visit(t, "")
	_, tablet.token = r.enrol(t, plant.Device{Kind: plant.Tablet, Name: "Tablet 1", Station: r.Station.ID})
	tablet.api("rounds", round(good()), 403)
}

func TestARoundSentAgainAfterItsSetupChanged(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "")
	_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Gauge"})
	round := map[string]any{"id": newNumber(), "station": r.Station.ID, "taken_at": r.Clock.Now(), "entries": []any{
		map[string]any{"characteristic": r.Diameter.ID, "unit": "mm", "readings": []any{"14.991", "14.990", "14.991", "14.990", "14.992"}}}}
	told := v.api("rounds", round, 200)
	st, err := r.StationState(context.Background(), r.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	setup := st.Characteristics[0].Setup
	setup.Decimals, setup.Unit = 4, "cm"
	r.Clock.Advance(time.Minute)
	if err := r.ChangeSetup(context.Background(), r.Diameter.ID, setup, setup.Version, r.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	if again := v.api("rounds", round, 200); again != told {
		t.Errorf("told %s, before %s", again, told)
	}
}

func TestAMachineTellsItsState(t *testing.T) {
	t.Parallel()
	r := serve(t)
	v := r.visit(t, "")
	_, v.token = r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Lathe", Station: r.Station.ID})
	at := "machines/" + r.Machine.ID.String()
	state := func() plant.MachineNow {
		t.Helper()
		st, err := r.StationState(context.Background(), r.Station.ID, 1)
		if err != nil {
			t.Fatal(err)
		}
		return st.Machines[0]
	}
	v.api(at, map[string]any{"id": newNumber(), "running": true, "part": r.PartA.Name, "lot": "K-2231", "counter": 100}, 200)
	r.Clock.Advance(time.Minute)
	stop := map[string]any{"id": newNumber(), "running": false, "counter": 103}
	v.api(at, stop, 200)
	v.api(at, stop, 200)
	m := state()
	if m.Running() || m.Part.ID != r.PartA.ID || m.State.Lot != "K-2231" || m.State.Counter == nil || *m.State.Counter != 103 {
		t.Errorf("the machine: %+v", m)
	}
	v.api(at, map[string]any{"id": newNumber(), "running": true, "at": r.Clock.Now().Add(-30 * time.Second)}, 422)
	v.api(at, map[string]any{"id": newNumber(), "part": "Axle 999"}, 422)
	v.api(at, map[string]any{"id": newNumber(), "counter": -1}, 422)
	v.api("machines/"+uuid.NewString(), map[string]any{"id": newNumber(), "running": true}, 404)
	if m := state(); m.Running() {
		t.Error("a refused message was taken")
	}
}
