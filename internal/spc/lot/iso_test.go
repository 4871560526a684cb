package lot_test

import (
	"testing"

	"holdfast/internal/spc/lot"
)

// isoFile is the recalled table; it was not seen in print.
type isoFile struct {
	Letters []struct {
		From int    `json:"lot_from"`
		To   *int   `json:"lot_to"`
		I    string `json:"level_I"`
		II   string `json:"level_II"`
		III  string `json:"level_III"`
	} `json:"code_letters"`
	Samples   map[string]int `json:"sample_sizes"`
	Reduced   map[string]int `json:"reduced_sample_sizes"`
	Normal    []isoEntry     `json:"normal_single"`
	Tightened []isoEntry     `json:"tightened_single"`
}

type isoEntry struct {
	Letter string  `json:"code_letter"`
	N      int     `json:"n"`
	AQL    float64 `json:"aql_percent"`
	Ac     int
	Re     int
}

// Source: ISO 2859-1, recalled from memory, not seen in print: every recalled entry must
// come out of the diagonal pattern.
func TestRecalledTables(t *testing.T) {
	t.Parallel()
	var file isoFile
	load(t, "iso2859_entries.json", &file)
	if len(file.Letters) != 15 || len(file.Normal) < 90 || len(file.Tightened) < 80 {
		t.Fatalf("%d, %d and %d entries", len(file.Letters), len(file.Normal), len(file.Tightened))
	}
	for _, row := range file.Letters {
		sizes := []int{row.From, row.From + 1}
		if row.To != nil {
			sizes = append(sizes, *row.To)
		} else {
			sizes = append(sizes, 10_000_000)
		}
		for level, want := range map[lot.Level]string{lot.LevelI: row.I, lot.LevelII: row.II, lot.LevelIII: row.III} {
			for _, size := range sizes {
				if got, err := lot.CodeLetter(size, level); err != nil || got != want {
					t.Errorf("lot of %d, level %d: %s, %v; want %s", size, level, got, err, want)
				}
			}
		}
	}
	for letter, n := range file.Reduced {
		if got, err := lot.ReducedSample(letter); err != nil || got != n {
			t.Errorf("reduced %s: %d, %v; want %d", letter, got, err, n)
		}
	}
	for severity, entries := range map[lot.Severity][]isoEntry{lot.NormalInspection: file.Normal, lot.TightenedInspection: file.Tightened} {
		for _, e := range entries {
			got, err := lot.ISOPlan(e.Letter, e.AQL, severity)
			if err != nil || got != (lot.Plan{N: e.N, C: e.Ac}) || e.Re != e.Ac+1 || e.N != file.Samples[e.Letter] {
				t.Errorf("%s, %s at %g %%: %+v, %v; want %+v", severity, e.Letter, e.AQL, got, err, e)
			}
		}
	}
	// Every cell that is not an entry must lead to one: same AQL, other letter.
	direct := map[lot.Severity]map[[2]any]bool{}
	for severity, entries := range map[lot.Severity][]isoEntry{lot.NormalInspection: file.Normal, lot.TightenedInspection: file.Tightened} {
		direct[severity] = map[[2]any]bool{}
		for _, e := range entries {
			direct[severity][[2]any{lot.Plan{N: e.N, C: e.Ac}, e.AQL}] = true
		}
		for letter := range file.Samples {
			for _, aql := range lot.AQLs() {
				p, err := lot.ISOPlan(letter, aql, severity)
				if err == nil && !direct[severity][[2]any{p, aql}] {
					t.Errorf("%s, %s at %g %% leads to %+v, which is no entry", severity, letter, aql, p)
				}
			}
		}
	}
}

// Arrows of the normal table at letter K (from memory): up to J, down to L.
func TestArrowsLeadToTheNextPlan(t *testing.T) {
	t.Parallel()
	for _, c := range []struct {
		letter string
		aql    float64
		want   lot.Plan
	}{
		{"K", 0.15, lot.Plan{N: 80, C: 0}},
		{"K", 0.25, lot.Plan{N: 200, C: 1}},
		{"K", 0.065, lot.Plan{N: 200, C: 0}},
		{"R", 10, lot.Plan{N: 125, C: 21}},
		{"A", 10, lot.Plan{N: 5, C: 1}},
	} {
		if got, err := lot.ISOPlan(c.letter, c.aql, lot.NormalInspection); err != nil || got != c.want {
			t.Errorf("%s at %g %%: %+v, %v; want %+v", c.letter, c.aql, got, err, c.want)
		}
	}
}

// Lots at the AQL are accepted most of the time, more rarely on tightened inspection.
func TestRecalledPlansProtectTheProducer(t *testing.T) {
	t.Parallel()
	var file isoFile
	load(t, "iso2859_entries.json", &file)
	for _, e := range file.Normal {
		pa, err := lot.Inspection{Plan: lot.Plan{N: e.N, C: e.Ac}, Model: lot.Binomial}.Accept(e.AQL / 100)
		if err != nil || pa < 0.87 || pa > 0.9951 {
			t.Errorf("%s at %g %%: accepted with %g, %v", e.Letter, e.AQL, pa, err)
		}
		strict, err := lot.ISOPlan(e.Letter, e.AQL, lot.TightenedInspection)
		if err != nil {
			continue
		}
		tight, err := lot.Inspection{Plan: strict, Model: lot.Binomial}.Accept(e.AQL / 100)
		if err != nil || tight > pa+0.03 {
			t.Errorf("%s at %g %%: tightened accepts %g, normal %g, %v", e.Letter, e.AQL, tight, pa, err)
		}
	}
	if ac, err := lot.ISOTighter("K", 1.0); err != nil || ac != 2 {
		t.Errorf("one step tighter than 3 is 2, got %d, %v", ac, err)
	}
	if ac, err := lot.ISOTighter("K", 0.65); err != nil || ac != 1 {
		t.Errorf("one step tighter than 2 is 1, got %d, %v", ac, err)
	}
	if _, err := lot.ISOTighter("K", 0.4); err == nil {
		t.Error("an acceptance number of 1 asks for no tighter plan")
	}
}

// lots feeds verdicts: a accepted, r rejected, t accepted also one step tighter.
func lots(t *testing.T, s lot.Switching, verdicts string, r lot.Result) (lot.Switching, []lot.Reason) {
	t.Helper()
	var reasons []lot.Reason
	for _, v := range verdicts {
		r.Accepted = v != 'r'
		r.AcceptedTighter = v == 't'
		next, reason, err := s.Next(r)
		if err != nil {
			t.Fatal(err)
		}
		s, reasons = next, append(reasons, reason)
	}
	return s, reasons
}

// Source: ISO 2859-1, switching rules (from memory).
func TestSwitching(t *testing.T) {
	t.Parallel()
	fifteen := "aaaaaaaaaaaaaaa"
	for _, c := range []struct {
		name     string
		verdicts string
		ac       int
		reduced  bool
		want     lot.Severity
		score    int
	}{
		{"one rejection", "aaar", 0, false, lot.NormalInspection, 0},
		{"two in two", "rr", 0, false, lot.TightenedInspection, 0},
		{"two in five", "raaar", 0, false, lot.TightenedInspection, 0},
		{"two in six", "raaaar", 0, false, lot.NormalInspection, 0},
		{"back after five", "rr" + "aaaaa", 0, false, lot.NormalInspection, 0},
		{"four and a rejection", "rr" + "aaaar" + "aaaa", 0, false, lot.TightenedInspection, 0},
		{"five rejected in all", "rr" + "rarararar", 0, false, lot.Discontinued, 0},
		{"four rejected in all", "rr" + "rararar", 0, false, lot.TightenedInspection, 0},
		{"score 30 of two each", fifteen, 1, true, lot.ReducedInspection, 0},
		{"score 28", fifteen[1:], 1, true, lot.NormalInspection, 28},
		{"score 30 of three each", "tttttttttt", 2, true, lot.ReducedInspection, 0},
		{"only just accepted", "tttttttttatt", 2, true, lot.NormalInspection, 6},
		{"not wanted", fifteen + "a", 1, false, lot.NormalInspection, 32},
		{"reduced and rejected", fifteen + "aaar", 0, true, lot.NormalInspection, 0},
	} {
		s, _ := lots(t, lot.Switching{}, c.verdicts, lot.Result{AcceptanceNumber: c.ac, ReducedAllowed: c.reduced})
		if got := s.Severity; got != c.want || s.Score != c.score {
			t.Errorf("%s: %s with a score of %d, want %s and %d", c.name, got, s.Score, c.want, c.score)
		}
	}
	s, reasons := lots(t, lot.Switching{}, "rr", lot.Result{})
	if reasons[1] != lot.TwoOfFiveRejected || reasons[0] != lot.NoChange {
		t.Errorf("reasons %v", reasons)
	}
	s, reasons = lots(t, s, "rrrrr", lot.Result{})
	if s.Severity != lot.Discontinued || reasons[4] != lot.FiveRejected {
		t.Errorf("%v %v", s, reasons)
	}
	if _, _, err := s.Next(lot.Result{Accepted: true}); err == nil {
		t.Error("a lot was taken while inspection is discontinued")
	}
	s, why, err := s.Resume()
	if err != nil || s.Severity != lot.TightenedInspection || why != lot.Called {
		t.Errorf("resumed to %v, %s, %v", s, why, err)
	}
	reduced := lot.Switching{Severity: lot.ReducedInspection}
	if s, why, err := reduced.Next(lot.Result{Accepted: true, Irregular: true}); err != nil || s.Severity != lot.NormalInspection || why != lot.Irregular {
		t.Errorf("irregular: %v, %s, %v", s, why, err)
	}
	if s, _, err := reduced.ToNormal(); err != nil || s.Severity != lot.NormalInspection {
		t.Errorf("called: %v, %v", s, err)
	}
}

// Next must not write into the state it was given, since that may be stored elsewhere.
func TestNextLeavesTheStateAlone(t *testing.T) {
	t.Parallel()
	recent := make([]bool, 3, 10)
	s := lot.Switching{Severity: lot.NormalInspection, Recent: recent}
	a, _, err := s.Next(lot.Result{Accepted: false})
	if err != nil {
		t.Fatal(err)
	}
	b, _, err := s.Next(lot.Result{Accepted: true})
	if err != nil || !a.Recent[3] || b.Recent[3] || len(s.Recent) != 3 {
		t.Errorf("%v %v %v, %v", s, a, b, err)
	}
}
