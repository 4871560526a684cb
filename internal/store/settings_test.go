package store_test

import (
	"testing"

	"holdfast/internal/store/storetest"
)

// With a long history these two settings are the difference between a few milliseconds
// and fifty for a page, and nothing else would tell that one of them was lost.
func TestStatementsAreNeitherPlannedAnewNorCompiled(t *testing.T) {
	t.Parallel()
	p := storetest.New(t, "x")
	for setting, want := range map[string]string{"jit": "off", "plan_cache_mode": "force_generic_plan"} {
		var got string
		if err := p.Pool().QueryRow(t.Context(), `select current_setting($1)`, setting).Scan(&got); err != nil || got != want {
			t.Errorf("%s is %q, %v; want %q", setting, got, err, want)
		}
	}
}
