package desk_test

import (
	"context"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
	"holdfast/web/desk"
	"holdfast/web/ui"
	"holdfast/web/words"
)

func TestTheListShowsEveryCharacteristicByLineAndStation(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 8, 5, 14991, 2, 1, nil)
	s.MustFreeze(t, s.Diameter)
	b := s.signIn(t, s.Engineer)
	p := b.get("/desk").is(http.StatusOK).has("Axle seat diameter", "Press force", "Grease mass", "Shoulder length", "Turning 1", "Revision 1, since 16:00", "none yet, 0 subgroups")
	if n := p.count(`data-testid="characteristic"`); n != 4 {
		t.Errorf("%d characteristics, want 4", n)
	}
	p = b.get("/desk?show=learning").is(http.StatusOK).has("Press force").hasNot("Axle seat diameter")
	if n := p.count(`data-testid="characteristic"`); n != 3 {
		t.Errorf("%d are learning, want 3", n)
	}
	b.get("/desk?show=needs&line=" + s.Other.ID.String()).is(http.StatusOK).has("None of the characteristics is like that now.")
}

func TestAChartWithoutASampleSaysWhatComesNext(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	b.get(path(s.Diameter)).is(http.StatusOK).has(`data-testid="empty"`, "No sample has been taken yet.", "None yet", "0 of 20 subgroups collected", "Target 14.991\u00a0mm")
	b.get("/desk/characteristic/not-an-id").is(http.StatusNotFound)
	b.get("/desk/characteristic/" + strings.ToUpper(s.Diameter.ID.String())).is(http.StatusNotFound)
	b.get("/desk/characteristic/01234567-89ab-7def-8123-456789abcdef").is(http.StatusNotFound)
}

// TestThePanelIsNamedByItsPoints: what is drawn stays an average of five after the size of
// later subgroups was changed.
func TestThePanelIsNamedByItsPoints(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 3, 5, 14991, 2, 1, nil)
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	setup := h.State.Setup
	setup.Size = 3
	if err := s.ChangeSetup(t.Context(), s.Diameter.ID, setup, setup.Version, s.Engineer.ID); err != nil {
		t.Fatal(err)
	}
	b := s.signIn(t, s.Engineer)
	b.get(path(s.Diameter)).is(http.StatusOK).has("Averages of 5").hasNot("Averages of 3")
	s.Clock.Advance(30 * time.Minute)
	round := s.Round(s.Diameter, 14990, 14991, 14992)
	round.Entries[0].SetupVersion = setup.Version + 1
	if _, err := s.Record(t.Context(), round); err != nil {
		t.Fatal(err)
	}
	b.get(path(s.Diameter)).is(http.StatusOK).has("Averages of each subgroup, 3 to 5 parts")
}

func TestTheChartShowsAnyStretch(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 70, 5, 14991, 2, 1, nil) // to the next day, 23:00
	b := s.signIn(t, s.Engineer)
	points := func(p page) int { return p.count(`class="pt"`) }

	p := b.get(path(s.Diameter)).is(http.StatusOK).has("data-live=", "topic=chart%2F"+s.Diameter.ID.String(), `data-testid="older"`).hasNot(`data-testid="newer"`)
	if points(p) != desk.LiveStretch {
		t.Errorf("%d subgroups are drawn, want %d", points(p), desk.LiveStretch)
	}
	for query, want := range map[string]int{
		"span=day": 49, "span=week": 70, "span=month": 70, "span=all": 70, "span=shift": 3, "last=12": 12,
		"from=2026-03-12T13:00&to=2026-03-12T15:00": 5, "from=2026-03-13T22:00": 3,
	} {
		p := b.get(path(s.Diameter) + "?" + query).is(http.StatusOK).hasNot("data-live=")
		if points(p) != want {
			t.Errorf("%s: %d subgroups, want %d", query, points(p), want)
		}
	}
	b.get(path(s.Diameter)+"?from=2020-01-01&to=2020-02-01").is(http.StatusOK).has("No subgroup was taken in this stretch.", "To the newest")
	for query, words := range map[string]string{
		"last=0": "Type a whole number from 1 to", "last=abc": "Type a whole number from 1 to", "last=1e400": "Type a whole number", "last=NaN": "Type a whole number",
		"from=yesterday": "This is no date and time.",
		"from=2026-03-12T13:00&to=2026-03-12T12:00": "The end must lie after the beginning.",
		"to=2026-03-12T13:00":                       "Say from when on.",
	} {
		b.get(path(s.Diameter)+"?"+query).is(http.StatusUnprocessableEntity).has(words, `aria-invalid="true"`)
	}
}

func TestOlderAndNewerLeadThroughTheRecordAndBack(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 20, 5, 14991, 2, 1, nil)
	b := s.signIn(t, s.Supervisor)
	first := b.get(path(s.Diameter) + "?last=8").is(http.StatusOK).hasNot("to-study")
	link := func(p page, name string) string {
		t.Helper()
		i := strings.Index(p.body, `data-testid="`+name+`"`)
		if i < 0 {
			t.Fatalf("no link %q", name)
		}
		tag := p.body[strings.LastIndex(p.body[:i], "<a "):i]
		_, rest, _ := strings.Cut(tag, `href="`)
		href, _, _ := strings.Cut(rest, `"`)
		return strings.ReplaceAll(href, "&amp;", "&")
	}
	second := b.get(link(first, "older")).is(http.StatusOK)
	third := b.get(link(second, "older")).is(http.StatusOK)
	if n := third.count(`class="pt"`); n != 4 {
		t.Errorf("the oldest page has %d subgroups, want 4", n)
	}
	back := b.get(link(third, "newer")).is(http.StatusOK)
	if n := back.count(`class="pt"`); n != 8 {
		t.Errorf("the page after it has %d subgroups, want 8", n)
	}
	newest := func(p page) string {
		_, rest, _ := strings.Cut(p.body, `data-fill="when">`)
		when, _, _ := strings.Cut(rest, "<")
		return when
	}
	if newest(back) != newest(second) {
		t.Errorf("forth and back ends at %q, want %q", newest(back), newest(second))
	}
}

func TestTheTableSaysWhatTheChartShows(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Mass, 12, 1, 120, 4, 1, nil)
	b := s.signIn(t, s.Engineer)
	p := b.get(path(s.Mass)+"?as=table").is(http.StatusOK).has(`data-testid="chart-table"`, "Single readings", "Moving ranges", "Operator 1").hasNot("data-live=")
	if n := p.count("<tr>"); n != 13 {
		t.Errorf("%d rows, want 12 and the head", n)
	}
}

// openMatter makes a characteristic with limits whose newest subgroups are far out.
func openMatter(t *testing.T, s *site) {
	t.Helper()
	s.fill(t, s.Diameter, 25, 5, 14991, 2, 1, nil)
	s.MustFreeze(t, s.Diameter)
	s.fill(t, s.Diameter, 5, 5, 14991, 2, 2, nil)
	s.fill(t, s.Diameter, 1, 5, 14997, 1, 3, nil)
}

func TestAnOpenSignalStandsOnTheChartWithItsReach(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	openMatter(t, s)
	b := s.signIn(t, s.Engineer)
	b.get(path(s.Diameter)).is(http.StatusOK).has("Beyond 3 sigma, high side", "Suspect since", "parts", `class="pennant open"`, "Nobody has taken it yet.", "Station", ">1</text>", "revision 1, frozen")
	s.fill(t, s.Diameter, 1, 5, 15004, 1, 4, nil)
	b.get(path(s.Diameter)).is(http.StatusOK).has("Hold", `class="ring-hold"`, "outside specification")

	st, err := s.StationState(t.Context(), s.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	var m *plant.Matter
	for _, c := range st.Characteristics {
		if c.ID == s.Diameter.ID {
			m = c.Matter
		}
	}
	if m == nil {
		t.Fatal("no matter is open")
	}
	s.Clock.Advance(time.Minute) // the fix comes after the newest sample
	if err := s.CloseMatter(t.Context(), plant.ClosingRequest{Matter: m.ID, Version: m.Version, Cause: "Insert chipped", Action: "Insert changed", Person: s.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	s.fill(t, s.Diameter, 2, 5, 14991, 2, 5, nil)
	b.get(path(s.Diameter)).is(http.StatusOK).has("Beyond 3 sigma, high side: Insert chipped", `class="pennant past"`, "The line breaks where judging began afresh.").hasNot("Reach:", `class="pennant open"`)
}

func TestAChangeStandsOnTheAxis(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 6, 5, 14991, 2, 1, nil)
	size := plant.Decimal{Units: -2, Decimals: 3}
	for _, c := range []plant.Change{
		{Kind: plant.Adjustment, Size: &size, Characteristic: s.Diameter.ID},
		{Kind: plant.ToolChanged, Note: "insert B"},
	} {
		c.ID, c.Station, c.Machine, c.HappenedAt, c.Person = storetest.ID(), s.Station.ID, s.Machine.ID, s.Clock.Now(), s.Operator.ID
		if err := s.LogChange(t.Context(), c); err != nil {
			t.Fatal(err)
		}
	}
	s.fill(t, s.Diameter, 2, 5, 14991, 2, 2, nil)
	s.signIn(t, s.Engineer).get(path(s.Diameter)).is(http.StatusOK).
		has("adjusted \u22120.002\u00a0mm, none was open", "tool changed (insert B)", `class="arrow hollow"`, "adjusted, none open")
}

func TestPageAndPushPrintTheSame(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	openMatter(t, s)
	p := s.signIn(t, s.Engineer).get(path(s.Diameter)).is(http.StatusOK)
	h, err := s.History(context.Background(), s.Diameter.ID, plant.Stretch{Last: desk.LiveStretch})
	if err != nil {
		t.Fatal(err)
	}
	parts, err := desk.Fragments(ui.NewFormat(words.For("en"), time.UTC, s.Clock.Now()), h)
	if err != nil {
		t.Fatal(err)
	}
	if len(parts) != 3 {
		t.Fatalf("%d parts, want 3", len(parts))
	}
	for _, f := range parts {
		if !strings.Contains(p.body, string(f.HTML)) {
			t.Errorf("%s is pushed otherwise than it is printed", f.ID)
		}
		if !strings.Contains(string(f.HTML[:200]), `id="`+f.ID+`"`) {
			t.Errorf("%s is not the id of its element", f.ID)
		}
	}
}

func TestOnlyWhoMaySeesTheDesk(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Diameter, 8, 5, 14991, 2, 1, nil)
	s.signIn(t, s.Operator).get("/desk").is(http.StatusForbidden)
	b := s.signIn(t, s.Supervisor)
	b.get(path(s.Diameter, "revisions")).is(http.StatusOK)
	b.get(path(s.Diameter, "study")).is(http.StatusForbidden)
	b.get(path(s.Diameter, "study", "freeze")).is(http.StatusForbidden)
	b.post(path(s.Diameter, "study", "freeze"), url.Values{}).is(http.StatusForbidden)
}
