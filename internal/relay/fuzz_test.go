package relay_test

import (
	"encoding/json"
	"path/filepath"
	"strings"
	"testing"
	"time"
	"unicode/utf8"

	"holdfast/internal/plant"
	"holdfast/internal/relay"
)

// FuzzParse: a line is one number or it is refused, and the number is one that stands
// there and that the server can read.
func FuzzParse(f *testing.F) {
	for _, text := range []string{"14.991", " +14,991 mm\r\n", "-.5mm", "0.5902 in", "#0042;-3 µm<", "1,499.10", "1.5e3", "−7", "--1", "1 2", "", "\x00", "5.", "9999999999999999999999"} {
		f.Add(text, "", "", false)
		f.Add(text, "#", "<", true)
	}
	f.Fuzz(func(t *testing.T, text, prefix, suffix string, sequence bool) {
		p := relay.Pattern{Prefix: prefix, Suffix: suffix, Unit: "mm", Sequence: sequence}
		l, err := p.Parse(text)
		if err != nil {
			if err != relay.ErrUnit && err != relay.ErrNumber || l != (relay.Line{}) {
				t.Fatalf("%q: %+v, %v", text, l, err)
			}
			return
		}
		if !strings.Contains(text, l.Number) || sequence != (l.Sequence != "") {
			t.Fatalf("%q: %+v", text, l)
		}
		if d, err := plant.ParseDecimal(l.Number); err != nil && len(l.Number) < 8 {
			t.Fatalf("%q is no number to the server: %v, %v", l.Number, d, err)
		}
		if again, err := p.Parse(prefix + suffixed(l, suffix)); err == nil && again.Number != l.Number && !strings.ContainsAny(prefix+suffix, "0123456789+-−., \t") {
			t.Fatalf("%q read again is %+v", l.Number, again)
		}
	})
}

func suffixed(l relay.Line, suffix string) string {
	if l.Sequence != "" {
		return l.Sequence + " " + l.Number + suffix
	}
	return l.Number + suffix
}

// FuzzPayload: whatever a broker delivers on a topic of readings, of rounds or of a lot is
// on the disk afterwards, and what waits there can be read after a restart.
func FuzzPayload(f *testing.F) {
	for _, text := range []string{"1.1", "1.2 mm", "0.5 in", "", "K-2231", strings.Repeat("x", 100), "\xff\xfe", "\x00",
		`{"id":"01980000-0000-7000-8000-000000000003","entries":[]}`, `{"id":"x"}`, `{"id":null}`, `[1]`, "no round", `{"id":"01980000-0000-7000-8000-000000000003"} {}`} {
		f.Add([]byte(text))
	}
	f.Fuzz(func(t *testing.T, payload []byte) {
		path := filepath.Join(t.TempDir(), "spool")
		s, err := relay.OpenSpool(path, quiet)
		if err != nil {
			t.Fatal(err)
		}
		s.Strict = true
		g := gather(s)
		b := relay.Broker{Rounds: "rounds", Readings: map[string]*relay.Gather{"diameter": g}, Lots: map[string]bool{"lot": true}, Spool: s, Now: time.Now, Log: quiet}
		for _, topic := range []string{"diameter", "rounds", "lot"} {
			if !relay.TakePayload(&b, topic, payload) {
				t.Fatalf("%s: %q was not taken", topic, payload)
			}
		}
		if lot := s.Lot("lot"); !utf8.ValidString(lot) || utf8.RuneCountInString(lot) > 80 {
			t.Fatalf("the lot %q", lot)
		}
		wait, partial := s.Len(), len(s.Waiting("Diameter"))
		if wait+partial < 2 { // one of the topic of readings and one of that of rounds
			t.Fatalf("nothing is kept of %q", payload)
		}
		if err := s.Close(); err != nil {
			t.Fatal(err)
		}
		if s, err = relay.OpenSpool(path, quiet); err != nil {
			t.Fatal(err)
		}
		defer s.Close()
		if s.Len() != wait || len(s.Waiting("Diameter")) != partial {
			t.Fatalf("after a restart %d and %d wait, before %d and %d", s.Len(), len(s.Waiting("Diameter")), wait, partial)
		}
		for {
			m, ok := s.Next(nil)
			if !ok {
				break
			}
			if !json.Valid(m.Body) || m.ID == "" {
				t.Fatalf("%s waits", m.Body)
			}
			s.Done(m.ID)
		}
	})
}
