package station_test

import (
	"net/http"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
	"holdfast/web/station"
	"holdfast/web/ui"
	"holdfast/web/words"
)

func TestPushAndPagePrintTheSame(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	for _, later := range []time.Duration{time.Minute, 31 * time.Minute, 9 * time.Minute, 40 * time.Minute} {
		s.Clock.Advance(later)
		st, err := s.StationState(t.Context(), s.Station.ID, 12)
		if err != nil {
			t.Fatal(err)
		}
		fragments, err := station.Fragments(ui.NewFormat(words.For("en"), time.UTC, s.Clock.Now()), st)
		if err != nil {
			t.Fatal(err)
		}
		body := b.get(s.at()).is(http.StatusOK).body
		for _, f := range fragments {
			if !strings.Contains(string(f.HTML), `id="`+f.ID+`"`) {
				t.Errorf("fragment %s does not carry its id", f.ID)
			}
			if strings.Contains(body, `id="`+f.ID+`"`) && !strings.Contains(body, string(f.HTML)) {
				t.Errorf("the page prints %s otherwise than the push", f.ID)
			}
		}
		if again, _ := station.Fragments(ui.NewFormat(words.For("en"), time.UTC, s.Clock.Now()), st); string(again[0].HTML) != string(fragments[0].HTML) {
			t.Error("the same state is rendered in two ways, so it would be pushed for ever")
		}
	}
}

func TestWhatIsDueIsSaidInMinutes(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	b.get(s.at()).says("Nothing is due until 12:30.", `data-testid="idle"`)
	s.Clock.Advance(31 * time.Minute)
	b.get(s.at()).says("Due now", `data-testid="round"`, "1 of 2")
	s.Clock.Advance(8 * time.Minute)
	b.get(s.at()).says("Late 9 min")
	s.Clock.Advance(time.Hour)
	b.get(s.at()).says("Late 1 h", "#s-unknown")
}

// TestARestingStationShowsHowItRuns: with nothing due each characteristic stands there
// with its newest subgroups, and leads to a round outside the plan.
func TestARestingStationShowsHowItRuns(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	b.get(s.at()).says(`class="pulse" href="`+s.at()+"?measure="+s.Diameter.ID.String()+`"`, "5 parts", "Learning").saysNot(`class="spark"`)
	s.MustRecord(t, s.Diameter, 14991, 14992, 14990, 14991, 14992)
	b.get(s.at()).says(`class="spark"`, "The last subgroup of Axle seat diameter (Lathe 1), without limits yet: 14.9912\u00a0mm", "<b class=\"newest\">14.9912\u00a0mm</b>")
}

// TestSoonAfterAMatterNobodyIsCalledToAct: the station owns it still, for the board and
// the desk, and has nothing to do about it.
func TestSoonAfterAMatterNobodyIsCalledToAct(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.steady(t)
	s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	st, err := s.StationState(t.Context(), s.Station.ID, 12)
	if err != nil {
		t.Fatal(err)
	}
	shown := func() string {
		t.Helper()
		fragments, err := station.Fragments(ui.NewFormat(words.For("en"), time.UTC, s.Clock.Now()), st)
		if err != nil {
			t.Fatal(err)
		}
		return string(fragments[1].HTML)
	}
	for i := range st.Characteristics {
		c := &st.Characteristics[i]
		if c.ID != s.Diameter.ID {
			continue
		}
		if html := shown(); !strings.Contains(html, "a matter is open") {
			t.Errorf("with a matter open it says %s", html)
		}
		c.Matter, c.Standing = nil, plant.Standing{Revision: c.Revision.ID, AfterMatter: true}
		if o := c.Ownership(); o.Owner != plant.AtStation || o.Reason != plant.Settling {
			t.Fatalf("soon after a matter it is owned by %s, %s", o.Owner, o.Reason)
		}
		if html := shown(); strings.Contains(html, "since the last matter") {
			t.Errorf("soon after a matter it says %s", html)
		}
	}
}

func TestStationIsRememberedByTheTablet(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	b.get("/station").is(http.StatusOK).says("Which station is this?", "Turning 1", "Turning 2")
	b.get(s.at()).is(http.StatusOK)
	if got := b.get("/station").is(http.StatusSeeOther); got.to != s.at() {
		t.Errorf("leads to %s", got.to)
	}
	b.get("/station?all").is(http.StatusOK).says("Which station is this?")
	if got := s.signIn(t, s.Engineer).get("/station"); got.status != http.StatusForbidden {
		t.Errorf("an engineer gets %d", got.status)
	}
}

// TestAnOpenHoldIsTheLargeWord: while nothing is due, what is open stands there, with its
// next step, and not that nothing is due.
func TestAnOpenHoldIsTheLargeWord(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	s.MustRecord(t, s.Force, 610, 612, 608, 611, 609, 613)
	b.get(s.at()).is(http.StatusOK).says("Nothing is due").saysNot(`data-testid="measure"`)
	at := s.Clock.Now().Format("15:04")
	a := s.MustRecord(t, s.Force, 610, 612, 691, 611, 609, 613)
	idle := b.get(s.at()).is(http.StatusOK)
	idle.says("Hold: keep the product aside, open since "+at, "See what to do", "Nobody has taken it yet", "matter/"+a.Parts[0].Matter.String())
	if h1 := idle.body[strings.Index(idle.body, `data-testid="idle"`):]; strings.Contains(h1[:strings.Index(h1, "</h1>")], "Nothing is due") {
		t.Error("the large word is that nothing is due")
	}
}
