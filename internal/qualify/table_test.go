package qualify

import (
	"errors"
	"io/fs"
	"math"
	"os"
	"strings"
	"testing"
)

// TestCasesCanFail bends what is expected, or what is obtained: no such case may pass.
func TestCasesCanFail(t *testing.T) {
	t.Parallel()
	for _, g := range groups {
		cases, err := g.cases()
		if err != nil {
			t.Fatal(err)
		}
		names := map[string]bool{}
		for _, c := range cases {
			if c.Name == "" || c.Source == "" || c.Basis == "" || c.Status != Published && c.Status != FromMemory && c.Status != Computed {
				t.Errorf("%s: %q does not say where it comes from: %+v", g.name, c.Name, c)
			}
			if key := c.Name + string(c.Status) + c.Source; names[key] {
				t.Errorf("%s: %s stands twice", g.name, c.Name)
			} else {
				names[key] = true
			}
			// An allowance as wide as the value itself would let anything pass.
			if math.Abs(c.Allowance) > 0.1*math.Abs(c.Expected) && c.Allowance > 0.01 && c.Expected != 0 {
				t.Errorf("%s: %s: allowance %g of %g", g.name, c.Name, c.Allowance, c.Expected)
			}
			bent := c
			bent.obtain = func() (float64, float64, error) {
				return c.Expected + c.Allowance*1.01 + 4.04*c.SE + 1e-20 + math.Abs(c.Expected)*1e-13, 0, nil
			}
			if bent.run().Passed {
				t.Errorf("%s: %s passes with a value outside its allowance", g.name, c.Name)
			}
		}
		c := cases[0]
		for _, got := range []figure{
			func() (float64, float64, error) { return math.NaN(), 0, nil },
			func() (float64, float64, error) { return c.Expected, math.NaN(), nil },
			func() (float64, float64, error) { return c.Expected, math.Inf(1), nil },
			func() (float64, float64, error) { return c.Expected, 0, errors.New("nothing was obtained") },
		} {
			c.obtain = got
			if r := c.run(); r.Passed || r.Problem == "" {
				t.Errorf("%s: %s passes without a value", g.name, c.Name)
			}
		}
	}
}

// TestEveryFileIsUsed looks for each embedded file in the sources of the table.
func TestEveryFileIsUsed(t *testing.T) {
	t.Parallel()
	sources := ""
	names, err := fs.Glob(os.DirFS("."), "*.go")
	if err != nil {
		t.Fatal(err)
	}
	for _, name := range names {
		if strings.HasSuffix(name, "_test.go") {
			continue
		}
		text, err := os.ReadFile(name)
		if err != nil {
			t.Fatal(err)
		}
		sources += string(text)
	}
	// The certified data sets are named by the rows of their table.
	table, err := files.ReadFile("cases/nist_strd_univariate/certified.csv")
	if err != nil {
		t.Fatal(err)
	}
	err = fs.WalkDir(files, "cases", func(path string, d fs.DirEntry, err error) error {
		if err != nil || d.IsDir() {
			return err
		}
		name := strings.TrimPrefix(path, "cases/")
		set, isSet := strings.CutPrefix(name, "nist_strd_univariate/")
		if !strings.Contains(sources, `"`+name+`"`) && !(isSet && strings.Contains(string(table), "\n"+strings.TrimSuffix(set, ".csv")+",")) {
			t.Errorf("%s is used by no case", name)
		}
		return nil
	})
	if err != nil {
		t.Fatal(err)
	}
}

func TestPrecisionFollowsThePrintedDigits(t *testing.T) {
	t.Parallel()
	for text, want := range map[string]float64{"1": 1, "28.0": 0.1, "0.0524": 1e-4, "1.5e-07": 1e-8, "2E3": 1e3, "-4.25": 0.01} {
		if got := lastPlace(text); math.Abs(got-want) > 1e-9*want {
			t.Errorf("the last place of %s is %g, want %g", text, got, want)
		}
	}
	if got := significant(370.398, 4); math.Abs(got-0.05) > 1e-6 {
		t.Errorf("half a unit of the fourth digit of 370.398 is %g, want 0.05", got)
	}
}
