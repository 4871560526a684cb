package desk_test

import (
	"net/http"
	"net/url"
	"strings"
	"testing"
	"time"

	"holdfast/internal/plant"
)

// studySite has 30 subgroups, of which the 11th was taken with something wrong.
func studySite(t *testing.T) (*site, *browser) {
	t.Helper()
	s := newSite(t)
	s.fill(t, s.Diameter, 30, 5, 14991, 2, 1, map[int]float64{10: 8})
	return s, s.signIn(t, s.Engineer)
}

// formOf reads the hidden and typed fields of a page's forms as they would be sent.
func formOf(p page) url.Values {
	q := url.Values{}
	rest := p.body
	for {
		i := strings.Index(rest, "<input ")
		if i < 0 {
			return q
		}
		rest = rest[i:]
		end := strings.Index(rest, ">")
		tag := rest[:end]
		rest = rest[end:]
		attr := func(name string) string {
			_, after, ok := strings.Cut(tag, " "+name+`="`)
			if !ok {
				return ""
			}
			v, _, _ := strings.Cut(after, `"`)
			return strings.NewReplacer("&amp;", "&", "&#39;", "'", "&#34;", `"`).Replace(v)
		}
		kind := attr("type")
		if name := attr("name"); name != "" && (kind != "checkbox" && kind != "radio" || strings.Contains(tag, " checked")) && name != "theme" && name != "to" || name == "to" && attr("type") == "datetime-local" {
			q.Add(name, attr("value"))
		}
	}
}

func TestAStudyShowsTrialLimitsAndWhatLiesBeyond(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	b.get(path(s.Diameter, "study")).is(http.StatusOK).has("Limit study for revision 1", "average beyond the limit, high", "No cause given: stays in",
		"1 subgroup is beyond the trial limits", "30 subgroups, 20 asked.", "Trial, 30", "Over this stretch", "Beyond 3 sigma, high side: stays in", `data-testid="to-freeze"`)
}

func TestASubgroupIsLeftOutOnlyWithACause(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	study := path(s.Diameter, "study")
	q := formOf(b.get(study).is(http.StatusOK))
	try := func(fields url.Values) page {
		t.Helper()
		all := url.Values{}
		for k, v := range q {
			all[k] = v
		}
		for k, v := range fields {
			all[k] = v
		}
		return b.get(with(study, all))
	}
	try(url.Values{"do": {"leave"}, "no": {"11"}}).is(http.StatusUnprocessableEntity).has("A subgroup is left out only with a cause.", `value="11"`)
	for _, no := range []string{"", "0", "31", "x", "1e400", "NaN"} {
		try(url.Values{"do": {"leave"}, "no": {no}, "own": {"Swarf"}}).is(http.StatusUnprocessableEntity).has("Type the number of a subgroup, 1 to 30.", `value="Swarf"`)
	}
	try(url.Values{"do": {"leave"}, "no": {"11"}, "own": {strings.Repeat("x", 121)}}).is(http.StatusUnprocessableEntity).has("at most 120 characters")

	left := try(url.Values{"do": {"leave"}, "no": {"11"}, "cause": {"Swarf in collet"}}).is(http.StatusSeeOther)
	p := b.get(left.to).is(http.StatusOK).has("Swarf in collet", "Trial, 29", "All 30", `class="dot out"`, "Take subgroup 11 back", "Spread and location are settled.")
	again := formOf(p)
	again.Set("do", "leave")
	again.Set("no", "11")
	again.Set("own", "once more")
	b.get(with(study, again)).is(http.StatusUnprocessableEntity).has("Subgroup 11 is left out already.")

	i := strings.Index(p.body, `value="back:`)
	value, _, _ := strings.Cut(p.body[i+len(`value="`):], `"`)
	back := formOf(p)
	back.Set("do", value)
	b.get(b.get(with(study, back)).is(http.StatusSeeOther).to).is(http.StatusOK).has("Trial, 30").hasNot("Take subgroup")
}

func TestLimitsFollowWhatIsLeftOut(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	study := path(s.Diameter, "study")
	q := formOf(b.get(study))
	q.Set("do", "leave")
	q.Set("no", "11")
	q.Set("own", "Bar end")
	p := b.get(b.get(with(study, q)).is(http.StatusSeeOther).to).is(http.StatusOK)
	// The columns of the comparison come from the same study of the record.
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{})
	if err != nil {
		t.Fatal(err)
	}
	trial := plant.Study{Setup: h.State.Setup, Points: h.Points, Rules: h.State.Setup.DefaultRules(),
		LeftOut: []plant.LeftOut{{Subgroup: h.Points[10].Subgroup, Cause: "Bar end"}}}
	if err := trial.Run(h.Course); err != nil {
		t.Fatal(err)
	}
	location, _, err := trial.Result.Standard.Bands(5)
	if err != nil {
		t.Fatal(err)
	}
	p.has("<b>"+plant.FormatFloat(location.Upper, 4)+"</b>", "<b>"+plant.FormatFloat(location.Center, 4)+"</b>", "<b>"+plant.FormatFloat(trial.Result.Standard.Sigma, 5)+"</b>")
}

func TestRulesAreChosenFromSetsAndAdded(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	study := path(s.Diameter, "study")
	q := formOf(b.get(study))
	do := func(q url.Values, what string, fields ...string) page {
		q.Set("do", what)
		for i := 0; i < len(fields); i += 2 {
			q.Set(fields[i], fields[i+1])
		}
		return b.get(with(study, q))
	}
	nelson := b.get(do(q, "set:nelson").is(http.StatusSeeOther).to).is(http.StatusOK).has("now as in Nelson (1984)")
	q = formOf(nelson)
	if n := len(q["loc"]); n != 8 {
		t.Errorf("%d rules are on, want the eight of Nelson", n)
	}
	p := b.get(do(q, "add:dis", "kind", "k-of-m", "k", "3", "m", "6", "z", "1,5").is(http.StatusSeeOther).to).is(http.StatusOK).has("3 of 6 beyond 1.5 sigma, same side")
	do(formOf(p), "add:dis", "kind", "k-of-m", "k", "3", "m", "6", "z", "1.5").is(http.StatusUnprocessableEntity).has("This rule is on already.")
	do(formOf(p), "add:loc", "kind", "k-of-m", "k", "9", "m", "4", "z", "2").is(http.StatusUnprocessableEntity).has("Type a whole number from 1 to 4.")
	do(formOf(p), "add:loc", "kind", "within", "m", "99", "z", "NaN").is(http.StatusUnprocessableEntity).has("Type a whole number from 2 to 63.", "Type a distance above 0")
	do(formOf(p), "add:loc", "kind", "none").is(http.StatusUnprocessableEntity).has("Choose a kind of rule.")
	none := formOf(p)
	delete(none, "loc")
	b.get(with(study, none)).is(http.StatusUnprocessableEntity).has("At least one rule of the location must be on.")
}

func TestAStudyWithoutLimitsSaysWhy(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Engineer)
	b.get(path(s.Diameter, "study")).is(http.StatusOK).has("No subgroup was taken in this stretch.")
	b.get(path(s.Diameter, "study") + "?last=5").is(http.StatusUnprocessableEntity).has("No subgroup was taken in this stretch.")
	s.fill(t, s.Diameter, 3, 5, 14991, 2, 1, nil)
	b.get(path(s.Diameter, "study")).is(http.StatusOK).has("There are 3 subgroups to compute limits from").hasNot("to-freeze")
	s.fill(t, s.Mass, 6, 1, 120, 0, 1, nil)
	b.get(path(s.Mass, "study")).is(http.StatusOK).has("The readings do not vary within subgroups.").hasNot("to-freeze")
	b.get(path(s.Mass, "study")+"?multiple=9&estimator=rbar").is(http.StatusUnprocessableEntity).has("Limits stand between 1 and 6 sigma", `value="9"`)
	b.get(path(s.Mass, "study")+"?from=soon").is(http.StatusUnprocessableEntity).has("This is no date and time.", `value="soon"`)
}

// signedForm is the freeze page with everything answered.
func signedForm(b *browser, c plant.Characteristic) url.Values {
	q := formOf(b.get(path(c, "study", "freeze")).is(http.StatusOK))
	for _, name := range []string{"known", "wanted", "lasting"} {
		q.Set(name, "yes")
	}
	q.Set("reason", "First limits of the new insert")
	q.Set("secret", "right")
	return q
}

func TestFreezingAsksAndSigns(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	freeze := path(s.Diameter, "study", "freeze")
	change := func(name, value string) page {
		q := signedForm(b, s.Diameter)
		q.Set(name, value)
		return b.post(freeze, q)
	}
	change("reason", " ").is(http.StatusUnprocessableEntity).has("Say why these limits are frozen.")
	change("reason", strings.Repeat("y", 401)).is(http.StatusUnprocessableEntity).has("at most 400 characters", strings.Repeat("y", 401))
	change("known", "").is(http.StatusUnprocessableEntity).has("Answer yes or no.", "First limits of the new insert")
	change("lasting", "no").is(http.StatusUnprocessableEntity).has("Freeze all the same")
	change("secret", "wrong").is(http.StatusUnprocessableEntity).has("This is not your password.", "First limits of the new insert").hasNot(`value="wrong"`)
	change("secret", "").is(http.StatusUnprocessableEntity).has("Type your password to sign.")
	change("in-force", "2026-03-01T06:00").is(http.StatusUnprocessableEntity).has("never in the past", `value="2026-03-01T06:00"`)
	change("in-force", "never").is(http.StatusUnprocessableEntity).has("This is no date and time.")
	if list, err := s.Revisions(t.Context(), s.Diameter.ID); err != nil || len(list) != 0 {
		t.Fatalf("%d revisions were frozen by forms that were refused (%v)", len(list), err)
	}

	done := change("known", "yes").is(http.StatusSeeOther)
	b.get(done.to).is(http.StatusOK).has("Revision 1 is frozen.", "First limits of the new insert (known: yes, wanted: yes, lasting: yes)", "Frozen by Engineer 1", "in force since")
	list, err := s.Revisions(t.Context(), s.Diameter.ID)
	if err != nil || len(list) != 1 {
		t.Fatalf("%d revisions, want 1 (%v)", len(list), err)
	}
	if r := list[0]; r.Basis.Subgroups != 30 || r.Author != s.Engineer.ID || len(r.Rules.Location) != 4 {
		t.Errorf("frozen: %+v", r)
	}
}

func TestFreezingLaterAndInDoubt(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	q := signedForm(b, s.Diameter)
	later := s.Clock.Now().Add(26 * time.Hour).Truncate(time.Minute)
	q.Set("in-force", later.Format("2006-01-02T15:04"))
	q.Set("wanted", "no")
	q.Set("despite", "1")
	b.get(b.post(path(s.Diameter, "study", "freeze"), q).is(http.StatusSeeOther).to).is(http.StatusOK).has("comes into force", "wanted: no")
	list, err := s.Revisions(t.Context(), s.Diameter.ID)
	if err != nil || len(list) != 1 || !list[0].InForceFrom.Equal(later) {
		t.Fatalf("in force from %v, want %v (%v)", list, later, err)
	}
}

func TestSomebodyFreezesMeanwhile(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	q := signedForm(b, s.Diameter)
	s.MustFreeze(t, s.Diameter)
	p := b.post(path(s.Diameter, "study", "freeze"), q).is(http.StatusConflict).
		has("Revision 1 was frozen meanwhile by somebody else.", "First limits of the new insert", "Freeze revision 2").hasNot(`value="right"`)
	again := formOf(p)
	again.Set("reason", q.Get("reason"))
	again.Set("secret", "right")
	b.post(path(s.Diameter, "study", "freeze"), again).is(http.StatusSeeOther)
	list, err := s.Revisions(t.Context(), s.Diameter.ID)
	if err != nil || len(list) != 2 {
		t.Fatalf("%d revisions, want 2 (%v)", len(list), err)
	}
}

func TestWhatIsFrozenIsWhatWasSeen(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	q := signedForm(b, s.Diameter)
	h, err := s.History(t.Context(), s.Diameter.ID, plant.Stretch{Last: 1})
	if err != nil {
		t.Fatal(err)
	}
	p := h.Points[0]
	if _, err := s.Correct(t.Context(), plant.Correction{Characteristic: s.Diameter.ID, Subgroup: p.Subgroup, TakenAt: p.TakenAt, Replaces: p.Version,
		Readings: []int64{14990, 14991, 14992, 14991, 14999}, Reason: "typing slip", Person: s.Operator.ID}); err != nil {
		t.Fatal(err)
	}
	b.post(path(s.Diameter, "study", "freeze"), q).is(http.StatusConflict).has("The record of this stretch has changed since you saw it.", "First limits of the new insert")
}

func TestTheRecordSaysWhatWasInForceWhen(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	revisions := path(s.Diameter, "revisions")
	b.get(revisions).is(http.StatusOK).has("No limits have been frozen yet.", "New limit study")
	before := s.Clock.Now()
	s.Clock.Advance(time.Minute)
	s.MustFreeze(t, s.Diameter)
	s.fill(t, s.Diameter, 30, 5, 14992, 1.5, 7, nil)
	between := s.Clock.Now()
	s.Clock.Advance(time.Minute)
	s.MustFreeze(t, s.Diameter)
	s.Clock.Advance(time.Hour)

	at := func(when time.Time) page {
		return b.get(with(revisions, url.Values{"at": {when.Format("2006-01-02T15:04")}}))
	}
	at(before).is(http.StatusOK).has("no limits were in force: the characteristic was learning")
	at(between).is(http.StatusOK).has("revision 1 was in force.", "revision asked")
	at(s.Clock.Now()).is(http.StatusOK).has("revision 2 was in force.")
	at(s.Clock.Now().Add(time.Hour)).is(http.StatusUnprocessableEntity).has("This lies in the future.")
	b.get(revisions+"?at=x").is(http.StatusUnprocessableEntity).has("This is no date and time.", `value="x"`)
	p := b.get(revisions+"?old=1&new=2").is(http.StatusOK).has("Side by side", "Revision 1 beside revision 2", "2 of 3 beyond 2 sigma, same side", "Nothing was left out.", "mean range, limits at 3 sigma")
	if n := p.count(`data-testid="revision"`); n != 2 {
		t.Errorf("%d revisions are listed, want 2", n)
	}
	b.get(revisions + "?old=9").is(http.StatusUnprocessableEntity).has("There is no such revision.")
}

func TestANewStretchIsComparedWithTheBasis(t *testing.T) {
	t.Parallel()
	s, b := studySite(t)
	s.MustFreeze(t, s.Diameter)
	b.get(path(s.Diameter, "study")).is(http.StatusOK).has("The stretch shares subgroups with revision 1")
	from := s.Clock.Now().Add(time.Minute)
	s.fill(t, s.Diameter, 30, 5, 14994, 2, 7, nil)
	p := b.get(path(s.Diameter, "study")+"?from="+from.Format("2006-01-02T15:04")).is(http.StatusOK).
		has("from the data of revision 1, p below 0.001", "the process is another one than it was then", "On record", "Revision 1")
	// A matter is open, the centre moved, the process is another one: none of them is ticked off.
	if n := p.count(`<li class="warn">`); n != 3 {
		t.Errorf("%d warnings before freezing, want 3", n)
	}
}
