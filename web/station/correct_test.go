package station_test

import (
	"net/http"
	"net/url"
	"testing"
	"time"

	"holdfast/internal/plant"
)

func TestLastRoundIsCorrectedWithAReasonAndBothVersionsStay(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	b := s.signIn(t, s.Operator)
	b.get(s.at("correct")).is(http.StatusOK).says("No round has been taken here yet.")
	s.steady(t)
	a := s.MustRecord(t, s.Diameter, 14996, 14997, 14998, 14995, 14999)
	s.Clock.Advance(time.Minute)
	page := b.get(s.at("correct")).is(http.StatusOK).says("14.996", "Typing slip", "Operator 1").saysNot(`data-testid="void"`)
	form := url.Values{"do": {"correct"}, "characteristic": {s.Diameter.ID.String()}, "subgroup": {page.field("subgroup")}, "replaces": {page.field("replaces")},
		"reason": {"typing slip"}, "reading": {"14.990", "14.991", "14.992", "14.989", "14.993"}}
	for _, tc := range []struct {
		key    string
		values []string
		says   []string
	}{
		{"reason", nil, []string{"Say why it is corrected.", `value="14.990"`}},
		{"reason", []string{"because"}, []string{"Say why it is corrected."}},
		{"reading", []string{"14.990", "x", "14.992", "14.989", "14.993"}, []string{"Part 2: This is not a number.", `value="x"`}},
		{"reading", []string{"14.990"}, []string{"Say why there are only 1 of 5 readings"}},
		{"reading", []string{""}, []string{"Type at least one reading."}},
		{"reading", []string{"14.99", "14.99", "14.99", "14.99", "14.99", "14.99"}, []string{"There are 6 readings where 5 are asked."}},
	} {
		b.post(s.at("correct"), with(form, tc.key, tc.values...)).is(http.StatusUnprocessableEntity).says(tc.says...)
	}
	b.post(s.at("correct"), with(form, "characteristic", s.Length.ID.String())).is(http.StatusNotFound)
	b.post(s.at("correct"), with(form, "do", "void")).is(http.StatusForbidden)

	to := b.post(s.at("correct"), form).is(http.StatusSeeOther).to
	b.get(to).is(http.StatusOK).says("Corrected since. First told: Look for a cause.", "14.9910")
	b.post(s.at("correct"), form).is(http.StatusConflict).says("Somebody has corrected this already.", "This is version 2: Typing slip.")
	if got, err := s.Answer(t.Context(), a.Round); err != nil || got.Verdict != plant.Look {
		t.Errorf("the answer as told is %v, %v", got.Verdict, err)
	}
	s.Clock.Advance(time.Hour)
	s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14989, 14993)
	b.post(s.at("correct"), form).is(http.StatusConflict).says("Another round was taken meanwhile.")
}

func TestSupervisorVoidsBySignature(t *testing.T) {
	t.Parallel()
	s := newSite(t)
	s.MustRecord(t, s.Diameter, 14990, 14991, 14992, 14989, 14993)
	b := s.signIn(t, s.Supervisor)
	page := b.get(s.at("correct")).says(`data-testid="void"`)
	form := url.Values{"do": {"void"}, "characteristic": {s.Diameter.ID.String()}, "subgroup": {page.field("subgroup")}, "replaces": {page.field("replaces")},
		"reason": {"wrong part measured"}}
	b.post(s.at("correct"), form).is(http.StatusUnprocessableEntity).says("Type your password again")
	b.post(s.at("correct"), with(form, "password", "wrong")).is(http.StatusUnprocessableEntity).says("Name or password is wrong.")
	if n := s.rounds(t); n != 1 {
		t.Fatalf("%d subgroups stand", n)
	}
	form.Set("password", "right")
	b.post(s.at("correct"), form).is(http.StatusSeeOther)
	if n := s.rounds(t); n != 0 {
		t.Fatalf("%d subgroups stand", n)
	}
	b.get(s.at("correct")).says("This was voided: Wrong part measured.")
}
