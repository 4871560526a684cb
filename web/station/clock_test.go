package station

import (
	"testing"
	"time"
)

// TestFixInAnHourThatComesTwice: clocks in Berlin go from 03:00 summer time back to 02:00
// on 25 October 2026 (EU directive 2000/84/EC: 01:00 UTC on the last Sunday of October),
// and from 02:00 to 03:00 on 29 March.
func TestFixInAnHourThatComesTwice(t *testing.T) {
	t.Parallel()
	zone, err := time.LoadLocation("Europe/Berlin")
	if err != nil {
		t.Fatal(err)
	}
	utc := func(day string, clock string) time.Time {
		at, err := time.Parse("2006-01-02 15:04", day+" "+clock)
		if err != nil {
			t.Fatal(err)
		}
		return at
	}
	const back, on = "2026-10-25", "2026-03-29"
	for _, tc := range []struct {
		name, day, opened, now, typed, want string
	}{
		{"signal and fix in the first pass", back, "00:15", "00:50", "2026-10-25T02:30", "00:30"},
		{"signal in the first pass, now after the second", back, "00:15", "01:40", "2026-10-25T02:30", "01:30"},
		{"signal and fix in the second pass", back, "01:15", "01:50", "2026-10-25T02:30", "01:30"},
		{"signal at the end of the first, fix in the second", back, "00:45", "01:50", "2026-10-25T02:30", "01:30"},
		{"after the hour", back, "01:15", "03:00", "2026-10-25T03:30", "02:30"},
		{"in the minute of the signal, second pass", back, "01:30", "01:50", "2026-10-25T02:30", "01:30"},
		{"before and after the missing hour", on, "00:30", "02:00", "2026-03-29T03:15", "01:15"},
		{"an ordinary night", "2026-10-24", "00:15", "00:50", "2026-10-24T02:30", "00:30"},
	} {
		got, err := fixInstant(tc.typed, utc(tc.day, tc.opened), utc(tc.day, tc.now), zone)
		if err != nil || !got.Truncate(time.Minute).Equal(utc(tc.day, tc.want)) {
			t.Errorf("%s: %s, %v; want %s", tc.name, got.UTC().Format("15:04"), err, tc.want)
		}
	}
}

func TestATimeIsTypedAsPeopleDo(t *testing.T) {
	t.Parallel()
	for typed, want := range map[string]string{"17:05": "17:05", "9:05": "09:05", "9.05": "09:05", "1705": "17:05", "905": "09:05", "0000": "00:00", " 9 : 05": "09:05", "noon": "noon", "": ""} {
		if got := clockTyped(typed); got != want {
			t.Errorf("%q is read as %q, want %q", typed, got, want)
		}
	}
}
