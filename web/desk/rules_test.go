package desk

import (
	"testing"

	"holdfast/internal/spc/watch"
)

func TestRulesAreReadAsTheyAreWritten(t *testing.T) {
	t.Parallel()
	for _, r := range append(watch.Nelson(), watch.Rule{Kind: watch.KOfM, K: 3, M: 6, Z: 1.25}) {
		if got, ok := readRule(ruleCode(r)); !ok || got != r {
			t.Errorf("%s is read as %+v, %v", ruleCode(r), got, ok)
		}
	}
	for _, bad := range []string{"", "beyond", "beyond:x", "beyond:NaN", "beyond:3:4", "k-of-m:3:2:2", "one-side:1", "one-side:64", "nothing:3", "within:15:+Inf"} {
		if r, ok := readRule(bad); ok {
			t.Errorf("%q is read as %+v", bad, r)
		}
	}
}

func TestLettersGoOnAfterZ(t *testing.T) {
	t.Parallel()
	for n, want := range map[int]string{0: "A", 25: "Z", 26: "AA", 51: "AZ", 52: "BA", 701: "ZZ", 702: "AAA"} {
		if got := letter(n); got != want {
			t.Errorf("%d is %s, want %s", n, got, want)
		}
	}
}
