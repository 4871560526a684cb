package ui

import (
	"math"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/spc/limits"
	"holdfast/web/words"
)

func berlin(t *testing.T) *time.Location {
	t.Helper()
	zone, err := time.LoadLocation("Europe/Berlin")
	if err != nil {
		t.Fatal(err)
	}
	return zone
}

func TestTimesAreInTheWallTimeOfThePlant(t *testing.T) {
	t.Parallel()
	zone := berlin(t)
	now := time.Date(2026, 3, 12, 11, 24, 0, 0, time.UTC) // 12:24 in the plant, a Thursday
	f := NewFormat(words.For("en"), zone, now)
	at := func(y int, m time.Month, d, h, min int) time.Time { return time.Date(y, m, d, h, min, 0, 0, zone) }
	for _, tc := range []struct {
		t    time.Time
		want string
	}{
		{at(2026, 3, 12, 12, 42), "12:42"},
		{at(2026, 3, 12, 0, 0), "00:00"},
		{at(2026, 3, 11, 23, 59), "Wed 23:59"},
		{at(2026, 3, 13, 6, 0), "Fri 06:00"},
		{at(2026, 3, 6, 12, 42), "Fri 12:42"},
		{at(2026, 3, 5, 12, 42), "5 Mar 12:42"}, // the same weekday as today would mislead
		{at(2026, 3, 19, 12, 42), "19 Mar 12:42"},
		{at(2025, 12, 31, 12, 42), "31 December 2025 12:42"},
		{time.Time{}, ""},
	} {
		if got := f.Clock(tc.t); got != tc.want {
			t.Errorf("%v: %q, want %q", tc.t, got, tc.want)
		}
	}
	if got := f.Day(now); got != "Thursday 12 March" {
		t.Errorf("got %q", got)
	}
	if got := f.Machine(now); got != "2026-03-12T12:24:00+01:00" {
		t.Errorf("got %q", got)
	}
	// The clock goes forward on 29 March 2026 in the European Union: two days later
	// by the calendar are 47 hours.
	f.Now = at(2026, 3, 30, 0, 30)
	if got := f.Clock(at(2026, 3, 28, 23, 45)); got != "Sat 23:45" {
		t.Errorf("got %q", got)
	}
}

func TestAges(t *testing.T) {
	t.Parallel()
	f := NewFormat(words.For("en"), nil, time.Date(2026, 3, 12, 12, 0, 0, 0, time.UTC))
	for d, want := range map[time.Duration]string{
		-time.Minute: "now", 59 * time.Second: "now", time.Minute: "1 min", 59*time.Minute + 59*time.Second: "59 min",
		time.Hour: "1 h", 23*time.Hour + 59*time.Minute: "23 h", 24 * time.Hour: "1 d", 70 * 24 * time.Hour: "70 d",
	} {
		if got := f.Age(d); got != want {
			t.Errorf("%v: %q, want %q", d, got, want)
		}
	}
	if got := f.Since(time.Time{}); got != "" {
		t.Errorf("since nobody knows when: %q", got)
	}
	due := plant.Due{At: f.Now.Add(-9 * time.Minute), State: plant.Late}
	if got := f.Late(due); got != "late 9 min" {
		t.Errorf("got %q", got)
	}
	due.State = plant.Later
	if got := f.Late(due); got != "" {
		t.Errorf("what is not due yet is %q", got)
	}
}

func TestNumbersKeepDecimalsUnitAndSign(t *testing.T) {
	t.Parallel()
	f := NewFormat(words.For("en"), nil, time.Now())
	lower, upper := plant.Decimal{Units: 14982, Decimals: 3}, plant.Decimal{Units: 15000, Decimals: 3}
	s := plant.Setup{Unit: "mm", Decimals: 3, Chart: limits.XBarR, Lower: &lower, Upper: &upper}
	oneSided := s
	oneSided.Lower = nil
	for _, tc := range [][2]string{
		{f.Number(14.9932, 4), "14.9932"},
		{f.Number(-0.5, 1), "\u22120.5"},
		{f.Number(math.NaN(), 1), ""},
		{f.Units(-5, 3), "\u22120.005"},
		{f.Signed(0.003, 3), "+0.003"},
		{f.Signed(-0.003, 3), "\u22120.003"},
		{f.Signed(-0.0001, 3), "0.000"},
		{f.Signed(math.Inf(1), 3), ""},
		{f.SignedDecimal(plant.Decimal{Units: 2, Decimals: 2}), "+0.02"},
		{f.Mean(14.99318, s), "14.9932\u00a0mm"},
		{f.Limit(14.99344, s), "14.9934\u00a0mm"},
		{f.Reading(14994, 3, s), "14.994\u00a0mm"},
		{f.WithUnit("", "mm"), ""},
		{f.Specification(s), "14.982 to 15.000\u00a0mm"},
		{f.Specification(oneSided), "at most 15.000\u00a0mm"},
		{f.Specification(plant.Setup{}), ""},
		{f.Count(12345), "12,345"},
	} {
		if tc[0] != tc[1] {
			t.Errorf("got %q, want %q", tc[0], tc[1])
		}
	}
}

func TestEveryConditionAndVerdictHasShapeWordAndTone(t *testing.T) {
	t.Parallel()
	w := words.For("en")
	page := rendered(t, sprite())
	for _, c := range []plant.Condition{plant.CalmLeave, plant.IsLearning, plant.IsStopped, plant.IsDue, plant.IsLate, plant.IsUnknown, plant.IsLook, plant.IsHold} {
		html := rendered(t, State(w, c))
		mustContain(t, html, `class="state `+Tone(c)+`"`, ConditionWord(w, c), `href="#s-`+SymbolOf(c)+`"`)
		mustContain(t, page, `id="s-`+SymbolOf(c)+`"`)
		mustNotContain(t, html, "[ui.")
	}
	for v, want := range map[plant.Verdict]string{plant.Leave: "Leave it alone", plant.Look: "Look for a cause", plant.Hold: "Hold the product", plant.Learning: "Learning"} {
		mustContain(t, rendered(t, VerdictState(w, v)), want, `href="#s-`+SymbolOf(ConditionOf(v))+`"`)
	}
	for _, o := range []plant.Owner{plant.Nobody, plant.AtStation, plant.Engineering} {
		mustNotContain(t, OwnerWord(w, o), "[")
	}
	for _, o := range []plant.Occasion{plant.ByTime, plant.ByParts, plant.StartUp, plant.Changeover, plant.ToolChange, plant.AfterAdjustment, plant.FirstPiece, plant.LastPiece, plant.Unplanned} {
		mustNotContain(t, OccasionWord(w, o), "[")
	}
}
