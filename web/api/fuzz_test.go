package api

import (
	"net/http"
	"strings"
	"testing"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
)

// FuzzRound: whatever is sent as a round is either understood, and then holds what the
// set-up asks and nothing else, or refused with a sentence and a field that can be kept.
func FuzzRound(f *testing.F) {
	machine := uuid.MustParse("01980000-0000-7000-8000-000000000001")
	c := plant.CharacteristicState{Characteristic: plant.Characteristic{ID: uuid.MustParse("01980000-0000-7000-8000-000000000002"), MachineID: machine, Name: "Axle seat diameter"},
		Setup: plant.Setup{Version: 3, Unit: "mm", Decimals: 3, Chart: limits.XBarR, Size: 5}}
	st := plant.StationState{Characteristics: []plant.CharacteristicState{c}}
	streams := map[uuid.UUID][]plant.Stream{machine: {{ID: uuid.New(), Name: "spindle 1"}, {ID: uuid.New(), Name: "spindle 2"}, {ID: uuid.New(), Name: "spindle 3", Retired: true}}}
	for _, seed := range []string{
		`{"id":"01980000-0000-7000-8000-000000000003","taken_at":"2026-03-12T12:31:05+01:00","lot":"K-1","entries":[{"characteristic":"Axle seat diameter","unit":"mm","readings":["14.991","14,99",null,"-1","+2."],"short":"part lost","streams":["spindle 1","spindle 2","spindle 1","spindle 2","spindle 1"]}]}`,
		`{"entries":[{"characteristic":"01980000-0000-7000-8000-000000000002","unit":"mm","readings":["1","2","3","4","5"]}]}`,
		`{"entries":[{"characteristic":"Axle seat diameter","unit":"mm","readings":["1"],"streams":["spindle 3"]}]}`,
		`{"entries":[{"characteristic":"Axle seat diameter","unit":"mm","readings":["99999999999999999999","1e3","NaN","","0x1"]}]}`,
		`{"entries":[{"characteristic":"Axle seat diameter","unit":"µm","readings":[]}]}`, `{"entires":[]}`, `{"entries":[{"readings":[1]}]}`, `{} {}`, `[`, "14.991", "\x00\xff",
	} {
		f.Add(seed)
	}
	worded := func(t *testing.T, err error) {
		t.Helper()
		pe := problemOf(err)
		if pe == nil || pe.Kind != plant.Invalid || pe.Message == "" || strings.ContainsRune(pe.Message, 0) {
			t.Fatalf("refused without words that can be kept: %v", err)
		}
	}
	f.Fuzz(func(t *testing.T, body string) {
		r, err := http.NewRequest(http.MethodPost, "/", strings.NewReader(body))
		if err != nil {
			t.Fatal(err)
		}
		var sent sentRound
		raw, err := read(r, &sent)
		if err != nil {
			worded(t, err)
			if text := asText(raw)["text"]; len(text) > maxText || strings.ContainsRune(text, 0) {
				t.Fatalf("this is not kept: %q", text)
			}
			return
		}
		for _, e := range sent.Entries {
			got, err := e.understand("entries[0]", st, nil, streams)
			if err != nil {
				worded(t, err)
				continue
			}
			if got.Characteristic != c.ID || e.Unit != "mm" || len(got.Readings) > 5 || len(got.Readings) < 5 && got.ShortReason == "" {
				t.Fatalf("understood %+v of %s", got, body)
			}
			if len(got.Streams) != 0 && len(got.Streams) != len(got.Readings) {
				t.Fatalf("%d streams for %d readings", len(got.Streams), len(got.Readings))
			}
			n := 0
			for _, text := range e.Readings {
				if text != nil {
					n++
				}
			}
			if n != len(got.Readings) || len(e.Streams) > 0 && n > 0 && len(got.Streams) == 0 {
				t.Fatalf("%d readings of %d, %d streams, of %s", len(got.Readings), n, len(got.Streams), body)
			}
		}
	})
}
