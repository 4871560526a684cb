package qualify_test

import (
	"testing"

	"holdfast/internal/qualify"
)

// TestThisMachineQualifies runs the table that the command runs.
func TestThisMachineQualifies(t *testing.T) {
	t.Parallel()
	r, err := qualify.Report(t.Context(), qualify.Options{
		Each: func(r qualify.Result) {
			if !r.Passed {
				t.Errorf("%s: %s: expected %.12g, obtained %.12g, difference %.3g, allowance %.3g %s (%s)",
					r.Group, r.Name, r.Expected, r.Obtained, r.Difference, r.Allowance, r.Problem, r.Source)
			}
		},
		Group: func(g qualify.GroupTotal) {
			t.Logf("%-40s %5d passed %3d failed %6.2f s", g.Name, g.Passed, g.Failed, g.Seconds)
			if g.Passed+g.Failed == 0 {
				t.Errorf("the group %s is empty", g.Name)
			}
		},
	})
	if err != nil {
		t.Fatal(err)
	}
	t.Logf("%d passed, %d failed in %.1f s", r.Passed, r.Failed, r.Seconds)
}
