package desk_test

import (
	"math"
	"math/rand/v2"
	"net/http"
	"net/url"
	"regexp"
	"strings"
	"testing"
	"time"

	"holdfast/internal/browsertest"
	"holdfast/internal/plant"
	"holdfast/internal/store/storetest"
)

// screw describes an adjusting point of the second machine that moves the mass.
func (s *site) screw(t *testing.T) plant.Knob {
	t.Helper()
	k, err := s.SaveKnob(t.Context(), plant.Knob{ID: storetest.ID(), Machine: s.Second.ID, Name: "Dosing screw", Unit: "turns", Step: *storetest.Decimal(t, "0.05"),
		Reason: "weighed", MadeBy: s.Engineer.ID, Moves: []plant.Gain{{Characteristic: s.Mass.ID, PerUnit: *storetest.Decimal(t, "0.2")}}})
	if err != nil {
		t.Fatal(err)
	}
	return k
}

// tamper records n rounds of the mass, each of them corrected by its whole deviation.
func (s *site) tamper(t *testing.T, k plant.Knob, n int) {
	t.Helper()
	rng := rand.New(rand.NewPCG(12, 7))
	offset := 0.0
	for range n {
		s.Clock.Advance(30 * time.Minute)
		reading := int64(math.Round(120 + offset + 5*rng.NormFloat64()))
		s.MustRecord(t, s.Mass, reading)
		turned := plant.Decimal{Units: -(reading - 120) * 5, Decimals: 2}
		if turned.Units == 0 {
			continue
		}
		offset -= float64(reading - 120)
		if err := s.LogChange(t.Context(), plant.Change{ID: storetest.ID(), Station: s.Station.ID, Machine: s.Second.ID, Kind: plant.Adjustment, Characteristic: s.Mass.ID,
			Knob: k.ID, Turned: &turned, HappenedAt: s.Clock.Now().Add(time.Second), Person: s.Operator.ID}); err != nil {
			t.Fatal(err)
		}
	}
}

func TestAuditShowsWhatAdjustingDid(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	b.get(path(s.Mass, "adjustments")).is(http.StatusOK).has("No subgroup was taken in this stretch.")
	s.fill(t, s.Mass, 20, 1, 120, 5, 4, nil)
	b.get(path(s.Mass, "adjustments")).is(http.StatusOK).has("Nothing was adjusted in this stretch.", "There is none in this stretch.")
	s.Clock.Advance(48 * time.Hour)
	s.tamper(t, s.screw(t), 60)
	page := b.get(path(s.Mass, "adjustments")).is(http.StatusOK).
		has("Adjusting with no signal open did harm", "further from target", "the fingerprint of over-adjustment", "Dosing screw", "none open",
			`class="other`, `class="arrow hollow"`, "as it would have been", "What this rests on", "Ppk as it was", "95 % interval").
		has("Gain of one, g²", "In all, g²").
		hasNot(s.Operator.Name, s.Supervisor.Name, "MISSING", "EXTRA")
	// All gains have the same decimals, so that the column can be read down.
	decimals := map[int]bool{}
	for _, cell := range regexp.MustCompile(`<td class="num(?: loss)?">[+\x{2212}]?\d+\.(\d+)</td>`).FindAllStringSubmatch(page.body, -1) {
		decimals[len(cell[1])] = true
	}
	if len(decimals) != 1 {
		t.Errorf("gains have %d different numbers of decimals", len(decimals))
	}
	if n := page.count("<tr>"); n < 40 {
		t.Errorf("%d rows are listed", n)
	}
	b.get(with(path(s.Mass, "adjustments"), url.Values{"as": {"table"}, "span": {"all"}})).is(http.StatusOK).has("Left alone between signals", `data-testid="chart-table"`)
	b.get(with(path(s.Mass, "adjustments"), url.Values{"from": {"nonsense"}})).is(http.StatusUnprocessableEntity).has("This is no date and time.")
	s.signIn(t, s.Supervisor).get(path(s.Mass, "adjustments")).is(http.StatusOK)
	// On the chart of the characteristic they are hollow arrows, small where they crowd.
	b.get(path(s.Mass)).is(http.StatusOK).has(`class="arrow hollow"`, "adjusted", "Dosing screw")
}

func TestAdjustingPointsAreEditedByAnEngineer(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	at := path(s.Diameter, "adjusting-points")
	page := b.get(at).is(http.StatusOK).has("Nothing is described yet.", "Axle seat diameter", "Press force").hasNot("Grease mass")
	form := url.Values{"knob": {hiddenOf(t, page, "knob")}, "version": {"0"}, "name": {"X offset"}, "unit": {"mm"}, "step": {"0,001"},
		"gain-" + s.Diameter.ID.String(): {"+2"}, "gain-" + s.Force.ID.String(): {"-0.5"}, "reason": {"setting sheet"}}
	bad := func(field, value, says string) {
		t.Helper()
		have := form.Get(field)
		form.Set(field, value)
		b.post(at, form).is(http.StatusUnprocessableEntity).has(says, `value="X offset"`)
		form.Set(field, have)
	}
	bad("step", "0", "must be above zero")
	bad("step", "small", "not a number")
	bad("unit", "", "in what its scale is marked")
	bad("reason", "", "where these figures come from")
	bad("gain-"+s.Diameter.ID.String(), "much", "not a number")
	bad("gain-"+s.Diameter.ID.String(), "0", "is left empty")
	b.get(b.post(at, form).is(http.StatusSeeOther).to).is(http.StatusOK).has("X offset is kept.", "+0.002\u00a0mm", "\u22120.0005\u00a0kN", "Version 1, Engineer 1")
	b.post(at, form).is(http.StatusSeeOther) // sent twice: the same is no new version

	form.Set("version", "1")
	form.Set("step", "0.002")
	form.Set("reason", "new scale")
	b.post(at, form).is(http.StatusSeeOther)
	form.Set("step", "0.003")
	b.post(at, form).is(http.StatusConflict).has("changed this meanwhile")
	b.get(at).has("Earlier versions", "Version 2, Engineer 1", "setting sheet")
	form.Set("version", "2")
	form.Set("do", "retire")
	b.post(at, form).is(http.StatusSeeOther)
	b.get(at).has("Retired: not offered any more")

	reader := s.signIn(t, s.Supervisor)
	reader.get(at).is(http.StatusOK).hasNot(`name="step"`)
	reader.post(at, form).is(http.StatusForbidden)
}

func hiddenOf(t *testing.T, p page, name string) string {
	t.Helper()
	_, rest, ok := strings.Cut(p.body, `name="`+name+`" value="`)
	if !ok {
		t.Fatalf("no field %q", name)
	}
	value, _, _ := strings.Cut(rest, `"`)
	return value
}

// barShown tells whether the bar with the menu and the person is drawn.
const barShown = `document.querySelector(".topbar").checkVisibility()`

func TestAuditPagesAreAccessible(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.fill(t, s.Mass, 5, 1, 120, 5, 4, nil)
	s.tamper(t, s.screw(t), 30)
	page := browsertest.Start(t).Person(s.url)
	page.Open("/sign-in")
	page.WaitFor(`document.activeElement.id === "login"`)
	page.Keys(s.Engineer.Login + "\t" + "right\r")
	page.WaitFor(`location.pathname.startsWith("/desk")`)
	for _, p := range []string{path(s.Mass, "adjustments"), path(s.Mass, "adjustments") + "?as=table", path(s.Mass, "adjusting-points")} {
		page.Open(p)
		page.Value(`document.querySelectorAll("details").forEach((d) => (d.open = true))`)
		page.Size(320, 800) // 1280 px at 400 %
		page.FitsWidth(p, 320)
		page.Size(1440, 900)
		page.Accessible(p)
	}
	page.Open(path(s.Mass, "adjustments"))
	page.Want("the bar on the screen", barShown, "true")
	page.Print()
	page.Want("the bar on paper", barShown, "false")
	page.Value(`(document.documentElement.dataset.theme = "night")`)
	page.Accessible("night")
}
