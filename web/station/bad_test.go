package station_test

import (
	"context"
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/plant"
)

// rounds counts what is on record at the fixture's station.
func (s *site) rounds(t testing.TB) int {
	t.Helper()
	st, err := s.StationState(context.Background(), s.Station.ID, 100)
	if err != nil {
		t.Fatal(err)
	}
	n := 0
	for _, c := range st.Characteristics {
		n += len(c.Points)
	}
	return n
}

func TestBadInputIsSaidAtTheFieldAndWritesNothing(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	working := b.get(s.at())
	id := s.Diameter.ID.String()
	far := s.Clock.Now().Add(time.Hour)
	good := []string{"14.991", "14.990", "14.992", "14.989", "14.993"}
	for _, tc := range []struct {
		name   string
		change func(url.Values)
		status int
		says   []string
	}{
		{"letters", set("reading-"+id, "14.991", "abc", "14.992", "14.989", "14.993"), 422, []string{"Part 2: This is not a number.", `value="abc"`, `value="14.993"`}},
		{"no number at all", set("reading-"+id, "NaN", "Inf", "1e400", "0x10", "1 2"), 422, []string{"Part 1: This is not a number.", "Part 3: This is not a number.", "Part 5: This is not a number.", `value="1e400"`}},
		{"two signs", set("reading-"+id, "14.99.1", "14,9,9", "--14.99", "14.99-", "-"), 422, []string{"Part 1: This is not a number.", "Part 4: This is not a number.", "Part 5: This is not a number."}},
		{"more decimals than measured", set("reading-"+id, "14.9911", "14.990", "14.992", "14.989", "14.993"), 422, []string{"Part 1: This has more decimals than are measured (3).", `value="14.9911"`}},
		{"too large", set("reading-"+id, "99999999999999999", "14.990", "14.992", "14.989", "14.993"), 422, []string{"Part 1: This number is too large"}},
		{"markup", set("reading-"+id, `"><b>`, "14.990", "14.992", "14.989", "14.993"), 422, []string{"&#34;&gt;&lt;b&gt;"}},
		{"nothing", set("reading-" + id), 422, []string{"Type at least one reading."}},
		{"too few", set("reading-"+id, "14.991", "14.990"), 422, []string{"Say why there are only 2 of 5 readings", `value="14.990"`}},
		{"too few for no such reason", func(f url.Values) {
			f["reading-"+id] = good[:2]
			f.Set("short-"+id, "bored")
		}, 422, []string{"Pick one of these reasons."}},
		{"too many", set("reading-"+id, append(good[:5:5], "14.990")...), 422, []string{"There are 6 readings where 5 are asked."}},
		{"a slip", set("reading-"+id, "149.91", "14.990", "14.992", "14.989", "14.993"), 422, []string{"Part 1: This is far from what is usual here. Look at the gauge", `value="149.91" data-first`, `value="14.990"`}},
		{"taken in the future", set("taken", itoa(far.UnixMilli())), 422, []string{"in the future", `value="14.990"`}},
		{"taken long ago", set("taken", itoa(far.Add(-30*24*time.Hour).UnixMilli())), 422, []string{"more than 7 days ago"}},
		{"a time that is none", set("taken", "noon"), 422, []string{"cannot be read", `value="14.990"`}},
		{"no number of its own", set("round", "1"), 422, []string{"has no number"}},
		{"due in a way that cannot be", set("due", "yesterday"), 422, []string{"due time that cannot be"}},
		{"due in the future", set("due", far.Format(time.RFC3339Nano)), 422, []string{"due time that cannot be"}},
		{"an occasion that there is not", set("occasion", "full moon"), 422, []string{"an occasion that there is not"}},
		{"another set-up", set("setup-"+id, "7"), 409, []string{"was changed meanwhile", `value="14.990"`}},
		{"an unknown characteristic", set("characteristic", uuid.NewString()), 404, []string{"another station"}},
		{"a characteristic of another station", set("characteristic", s.Length.ID.String()), 404, []string{"another station"}},
		{"a characteristic that is no id", set("characteristic", "x"), 404, nil},
		{"one characteristic twice", set("characteristic", id, id), 422, []string{"twice"}},
		{"no characteristic", set("characteristic"), 422, []string{"names nothing that is measured"}},
	} {
		t.Run(tc.name, func(t *testing.T) {
			form := working.round(s.Diameter, good...)
			form.Set("round", uuid.Must(uuid.NewV7()).String())
			tc.change(form)
			got := b.post(s.at("round"), form)
			got.t = t
			got.is(tc.status).says(tc.says...)
			if n := s.rounds(t); n != 0 {
				t.Fatalf("%d subgroups were written", n)
			}
		})
	}
	big := b.post(s.at("round"), url.Values{"reading-" + id: {strings.Repeat("9", 10<<20)}})
	big.is(http.StatusRequestEntityTooLarge)
	if n := s.rounds(t); n != 0 {
		t.Fatalf("%d subgroups were written", n)
	}
}

func set(key string, values ...string) func(url.Values) {
	return func(f url.Values) { f[key] = values }
}

func TestUnknownAddressesAreNotFound(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	elsewhere := s.MustRecord(t, s.Length, 1000, 1001, 999)
	outside := s.MustRecord(t, s.Length, 1100, 1001, 999)
	none := uuid.NewString()
	for _, path := range []string{
		"/station/" + none, "/station/x", "/station/" + strings.ToUpper(s.Station.ID.String()),
		s.at() + "?measure=" + none, s.at() + "?measure=" + s.Length.ID.String(),
		s.at("round", none), s.at("round", elsewhere.Round.String()), s.at("matter", none), s.at("matter", outside.Parts[0].Matter.String()),
		s.at("change", none), s.at("change", s.Length.ID.String()), s.at("machine", none), s.at("nothing"),
	} {
		if got := b.get(path); got.status != http.StatusNotFound {
			t.Errorf("GET %s: status %d", path, got.status)
		}
	}
	matter := outside.Parts[0].Matter.String()
	for _, path := range []string{s.at("matter", matter, "take"), s.at("matter", matter, "close"), s.at("machine", none)} {
		if got := b.post(path, url.Values{"version": {"1"}}); got.status != http.StatusNotFound {
			t.Errorf("POST %s: status %d", path, got.status)
		}
	}
}

func TestSlipIsAskedForOnceAndBothTypingsAreKept(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	id := s.Diameter.ID.String()
	form := b.get(s.at()).round(s.Diameter, "14.991", "149.90", "14.992", "14.989", "14.993")
	asked := b.post(s.at("round"), form).is(http.StatusUnprocessableEntity)
	asked.says(`name="first-`+id+`-1" value="149.90"`).saysNot(`value="14.990"`, "14.990")
	form.Set("round", asked.field("round"))
	form["first-"+id+"-1"] = []string{"149.90"}

	t.Run("another number far out is asked for again", func(t *testing.T) {
		form["reading-"+id][1] = "150.90"
		b.post(s.at("round"), form).is(http.StatusUnprocessableEntity).says("Look at the gauge", `value="149.90"`, `value="150.90"`)
	})
	t.Run("the same number typed again passes", func(t *testing.T) {
		form["reading-"+id][1] = "149,900"
		to := b.post(s.at("round"), form).is(http.StatusSeeOther).to
		b.get(to).is(http.StatusOK).says("Hold the product", "part 2 is outside specification, 149.900", "the upper limit is 15.000")
	})
	var retyped []plant.Retyped
	row := s.Pool().QueryRow(t.Context(), `select retyped from subgroup where characteristic_id = $1`, s.Diameter.ID)
	if err := row.Scan(&retyped); err != nil || len(retyped) != 1 || retyped[0] != (plant.Retyped{Index: 1, First: "149.90"}) {
		t.Errorf("kept %v, %v", retyped, err)
	}
}

func TestRoundMayBeTypedAsDeviation(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	form := b.get(s.at()).round(s.Diameter, "+1", "-2", "0", "\u22123", "4")
	form.Set("entry", "deviation")
	bad := b.post(s.at("round"), with(form, "reading-"+s.Diameter.ID.String(), "0.5", "-2", "0", "3", "4")).is(http.StatusUnprocessableEntity)
	bad.says("whole last digits", `value="0.5"`)
	b.post(s.at("round"), form).is(http.StatusSeeOther)
	st, err := s.StationState(t.Context(), s.Station.ID, 1)
	if err != nil {
		t.Fatal(err)
	}
	want := []int64{14992, 14989, 14991, 14988, 14995}
	for _, c := range st.Characteristics {
		if c.ID == s.Diameter.ID && len(c.Points) == 1 {
			for i, v := range c.Points[0].Readings {
				if v != want[i] {
					t.Errorf("reading %d is %d, want %d", i+1, v, want[i])
				}
			}
			want = nil
		}
	}
	if want != nil {
		t.Error("nothing was recorded")
	}
	b.get(s.at() + "?measure=" + s.Diameter.ID.String()).says(`value="deviation" checked`)
}

func with(form url.Values, key string, values ...string) url.Values {
	out := url.Values{}
	for k, v := range form {
		out[k] = v
	}
	out[key] = values
	return out
}

func TestShortSubgroupIsRecordedWithItsReason(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.Clock.Advance(31 * time.Minute)
	b := s.signIn(t, s.Operator)
	id := s.Diameter.ID.String()
	form := b.get(s.at()).round(s.Diameter, "14.991", "", "14.992", "", "")
	form.Set("short-"+id, "part lost")
	to := b.post(s.at("round"), form).is(http.StatusSeeOther).to
	b.get(to).says("average of 2", "of 5 asked")
	last, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil || len(last.Points) != 1 || last.Points[0].ShortReason != "part lost" || len(last.Points[0].Readings) != 2 {
		t.Errorf("recorded %+v, %v", last.Points, err)
	}
}
