package slip_test

import (
	"errors"
	"math"
	"slices"
	"strconv"
	"strings"
	"testing"

	"holdfast/internal/spc/slip"
)

func around(t testing.TB, center, sigma float64) slip.Expected {
	t.Helper()
	e, err := slip.AroundCenter(center, sigma)
	if err != nil {
		t.Fatal(err)
	}
	return e
}

// The cases apply the list of mistakes literally; there is no published table
// to compare with.
func TestSlipFindsTheReadingOneMistakeAway(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name, typed   string
		center, sigma float64
		decimals      int
		want          []string
	}{
		{"missing decimal sign", "1203", 12, 0.02, 2, []string{"12.03"}},
		{"missing sign, three decimals", "12031", 12, 0.02, 3, []string{"12.031"}},
		{"ten times too large", "120.3", 12, 0.02, 2, []string{"12.03"}},
		{"ten times too small", "1.203", 12, 0.02, 2, []string{"12.03"}},
		{"a hundred times too small", "0.1203", 12, 0.02, 2, []string{"12.03"}},
		{"swapped neighbours", "21.03", 12, 0.02, 2, []string{"12.03"}},
		{"swapped after the sign", "12.30", 12, 0.02, 2, []string{"12.03"}},
		{"swapped across the sign", "13.2", 12.3, 0.04, 1, []string{"12.3"}},
		{"dropped digit", "2.03", 12, 0.02, 2, []string{"12.03"}},
		{"dropped zero", "12.3", 12.03, 0.009, 2, []string{"12.03"}},
		{"doubled digit", "112.03", 12, 0.02, 2, []string{"12.03"}},
		{"doubled decimal", "0.0055", 0.005, 0.00002, 3, []string{"0.005"}},
		{"other sign", "-0.030", 0.03, 0.001, 3, []string{"0.030"}},
		{"comma as decimal sign", "120,3", 12, 0.02, 2, []string{"12.03"}},
		{"negative centre", "-151", -15, 0.1, 1, []string{"-15.1"}},
		{"rounding would be a second mistake", "120.35", 12, 0.02, 2, []string{}},
		{"far out without an explanation", "47.11", 12, 0.02, 2, []string{}},
		{"two dropped digits explain it, nearest first", "1.0", 10, 0.4, 1,
			[]string{"10.0", "11.0"}},
	} {
		f, err := around(t, tc.center, tc.sigma).Check(tc.typed, tc.decimals)
		if err != nil || !f.Suspect || !slices.Equal(f.Candidates, tc.want) {
			t.Errorf("%s: %q gives %+v, %v; want %q", tc.name, tc.typed, f, err, tc.want)
		}
	}
}

func TestUsualReadingIsNotSuspect(t *testing.T) {
	t.Parallel()
	e := around(t, 10, 0.1)
	for typed, suspect := range map[string]bool{
		"10": false, "10.6": false, "9.4": false, "10.61": true, "9.39": true, "+10.05": false,
	} {
		f, err := e.Check(typed, 2)
		if err != nil || f.Suspect != suspect || (!suspect && len(f.Candidates) > 0) {
			t.Errorf("%q: %+v, %v; want suspect %v", typed, f, err, suspect)
		}
	}
}

func TestRangeIsWidenedByItsWidthOnEitherSide(t *testing.T) {
	t.Parallel()
	e, err := slip.WithinRange(11.5, 12.5)
	if err != nil {
		t.Fatal(err)
	}
	for typed, want := range map[string]slip.Finding{
		"13.5":  {},
		"10.5":  {},
		"13.51": {Suspect: true},
		"1203":  {Suspect: true, Candidates: []string{"12.03"}},
	} {
		f, err := e.Check(typed, 2)
		if err != nil || f.Suspect != want.Suspect {
			t.Errorf("%q: %+v, %v; want %+v", typed, f, err, want)
		}
		if want.Candidates != nil && !slices.Equal(f.Candidates, want.Candidates) {
			t.Errorf("%q: %q, want %q", typed, f.Candidates, want.Candidates)
		}
	}
}

// Every reading spoilt by one mistake of the list must come back among the
// candidates: the mistakes are made here on text, not on numbers.
func TestEveryMistakeIsUndone(t *testing.T) {
	t.Parallel()
	e := around(t, 12.34, 0.02)
	for k := 1228; k <= 1240; k++ {
		want := strconv.FormatFloat(float64(k)/100, 'f', 2, 64)
		digits := strings.ReplaceAll(want, ".", "")
		spoilt := []string{digits, digits[:3] + "." + digits[3:], digits[:1] + "." + digits[1:],
			"0." + digits, "-" + want}
		for i := range want {
			if want[i] == '.' {
				continue
			}
			spoilt = append(spoilt, want[:i]+want[i+1:], want[:i]+want[i:i+1]+want[i:])
			if i+1 < len(want) && want[i+1] != '.' {
				spoilt = append(spoilt, want[:i]+want[i+1:i+2]+want[i:i+1]+want[i+2:])
			}
		}
		for _, typed := range spoilt {
			f, err := e.Check(typed, 2)
			if err != nil {
				t.Fatal(err)
			}
			if f.Suspect && !slices.Contains(f.Candidates, want) {
				t.Errorf("%q typed for %s: candidates %q", typed, want, f.Candidates)
			}
		}
	}
}

func TestSlipRefusesBadInput(t *testing.T) {
	t.Parallel()
	e := around(t, 10, 1)
	for _, typed := range []string{"", " ", ".", "-", "1.2.3", "1,2.3", "1e5", "NaN", "0x10", "12 3", "1²",
		strings.Repeat("9", 60)} {
		if _, err := e.Check(typed, 2); !errors.Is(err, slip.ErrInput) {
			t.Errorf("%q: error %v", typed, err)
		}
	}
	for _, d := range []int{-1, 99} {
		if _, err := e.Check("1", d); err == nil || !strings.Contains(err.Error(), "decimals") {
			t.Errorf("decimals %d: error %v", d, err)
		}
	}
	if _, err := (slip.Expected{}).Check("1", 0); err == nil {
		t.Error("an empty expectation was taken")
	}
	for _, bad := range [][2]float64{{math.NaN(), 1}, {0, 0}, {0, -1}, {0, math.Inf(1)}, {math.Inf(1), 1},
		{math.MaxFloat64, math.MaxFloat64}, {1e20, 1}} {
		if _, err := slip.AroundCenter(bad[0], bad[1]); err == nil {
			t.Errorf("AroundCenter%v was taken", bad)
		}
	}
	for _, bad := range [][2]float64{{1, 1}, {2, 1}, {math.NaN(), 1}, {-math.MaxFloat64, math.MaxFloat64}} {
		if _, err := slip.WithinRange(bad[0], bad[1]); err == nil {
			t.Errorf("WithinRange%v was taken", bad)
		}
	}
}

func FuzzCheck(f *testing.F) {
	f.Add("120.3", 12.0, 0.02, 2)
	f.Add("-0,0055", 0.005, 0.0001, 3)
	f.Add("9999999999999999999999999999999999999999", 1.0, 1e-9, 15)
	f.Fuzz(func(t *testing.T, typed string, center, sigma float64, decimals int) {
		e, err := slip.AroundCenter(center, sigma)
		if err != nil {
			return
		}
		got, err := e.Check(typed, decimals)
		if err != nil {
			return
		}
		if !got.Suspect && len(got.Candidates) > 0 {
			t.Fatal("candidates for a usual reading")
		}
		seen := map[string]bool{}
		for _, c := range got.Candidates {
			v, err := strconv.ParseFloat(c, 64)
			if err != nil || math.Abs(v-center) > 3.001*sigma+1e-9*math.Abs(center) || seen[c] {
				t.Fatalf("candidate %q of %q (center %g, sigma %g): %v", c, typed, center, sigma, err)
			}
			seen[c] = true
			if _, dec, _ := strings.Cut(c, "."); len(dec) != decimals {
				t.Fatalf("candidate %q is not written with %d decimals", c, decimals)
			}
		}
	})
}
