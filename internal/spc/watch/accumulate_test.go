package watch_test

import (
	"encoding/json"
	"math"
	"math/rand/v2"
	"os"
	"testing"

	"holdfast/internal/spc/watch"
)

// accumulated is testdata/ewma_cusum.json; each part names its source.
type accumulated struct {
	Textbook struct {
		X     []float64
		CUSUM struct {
			Parameters struct{ Mu0, K, H float64 }
			Rows       []struct {
				CPlus  float64 `json:"c_plus"`
				CMinus float64 `json:"c_minus"`
			}
			SignalAt  int `json:"signal_at"`
			Published struct {
				SignalAt int     `json:"signal_at"`
				CPlus    float64 `json:"c_plus_at_signal"`
			}
		}
		EWMA struct {
			Parameters struct{ Mu0, Lambda, L, Sigma float64 }
			Rows       []struct {
				Z, LCL, UCL float64
				Signal      bool
			}
			FirstSignal int `json:"first_signal"`
		}
	}
	HandbookCUSUM struct {
		Data       []float64
		Parameters struct{ Target, K, H float64 }
		Published  struct {
			First int `json:"first_upper_signal"`
			Upper []float64
		}
		Computed struct{ Upper, Lower []float64 }
	} `json:"handbook_cusum"`
	HandbookEWMA struct {
		Data       []float64
		Parameters struct{ Target, Lambda, S, K float64 }
		Published  struct {
			UCL, LCL float64
			Z        []float64 `json:"z_from_0"`
		}
		Computed struct {
			Z         []float64 `json:"z_from_0"`
			HalfWidth []float64 `json:"half_width_time_varying"`
		}
	} `json:"handbook_ewma"`
}

func loadAccumulated(t *testing.T) accumulated {
	t.Helper()
	raw, err := os.ReadFile("testdata/ewma_cusum.json")
	if err != nil {
		t.Fatal(err)
	}
	var ref accumulated
	if err := json.Unmarshal(raw, &ref); err != nil {
		t.Fatal(err)
	}
	if len(ref.Textbook.X) != 30 || len(ref.Textbook.CUSUM.Rows) != 30 || len(ref.Textbook.EWMA.Rows) != 30 ||
		len(ref.HandbookCUSUM.Data) != 20 || len(ref.HandbookEWMA.Data) != 20 {
		t.Fatal("testdata/ewma_cusum.json is not whole")
	}
	return ref
}

func near(t *testing.T, what string, at int, got, want, tol float64) {
	t.Helper()
	if !(math.Abs(got-want) <= tol) {
		t.Errorf("%s, point %d: %.10g, want %.10g within %g", what, at, got, want, tol)
	}
}

func TestCUSUMReproducesPublishedRows(t *testing.T) {
	t.Parallel()
	ref := loadAccumulated(t)
	book := ref.Textbook.CUSUM
	c, s, first := watch.CUSUM{K: book.Parameters.K, H: book.Parameters.H}, watch.CUSUMState{}, 0
	for i, x := range ref.Textbook.X {
		side := c.Step(&s, x-book.Parameters.Mu0)
		near(t, "textbook high sum", i+1, s.High, book.Rows[i].CPlus, 1e-9)
		near(t, "textbook low sum", i+1, s.Low, book.Rows[i].CMinus, 1e-9)
		if side != watch.None && first == 0 {
			first = i + 1
			if side != watch.High {
				t.Errorf("textbook: signal on the %s, want high", side)
			}
			near(t, "printed sum at the signal", first, s.High, book.Published.CPlus, 0.005)
		}
	}
	if first != book.SignalAt || first != book.Published.SignalAt {
		t.Errorf("textbook: first signal at %d, want %d", first, book.SignalAt)
	}

	hb := ref.HandbookCUSUM
	c, s, first = watch.CUSUM{K: hb.Parameters.K, H: hb.Parameters.H}, watch.CUSUMState{}, 0
	for i, x := range hb.Data {
		// The handbook cumulates from a centre of target and slack k in units.
		side := c.Step(&s, x-hb.Parameters.Target)
		near(t, "handbook printed high sum", i+1, s.High, hb.Published.Upper[i], 0.0051)
		near(t, "handbook high sum", i+1, s.High, hb.Computed.Upper[i], 1e-9)
		near(t, "handbook low sum", i+1, s.Low, hb.Computed.Lower[i], 1e-9)
		if side != watch.None && first == 0 {
			first = i + 1
		}
	}
	if first != hb.Published.First {
		t.Errorf("handbook: first signal at %d, want %d", first, hb.Published.First)
	}
}

func TestEWMAReproducesPublishedRows(t *testing.T) {
	t.Parallel()
	ref := loadAccumulated(t)
	book := ref.Textbook.EWMA
	p := book.Parameters
	e, s, first := watch.EWMA{Lambda: p.Lambda, L: p.L}, watch.EWMAState{}, 0
	for i, x := range ref.Textbook.X {
		half, side := e.Step(&s, (x-p.Mu0)/p.Sigma, 1)
		near(t, "textbook average", i+1, p.Mu0+p.Sigma*s.Deviation, book.Rows[i].Z, 5e-9)
		near(t, "textbook lower limit", i+1, p.Mu0-p.Sigma*half, book.Rows[i].LCL, 5e-9)
		near(t, "textbook upper limit", i+1, p.Mu0+p.Sigma*half, book.Rows[i].UCL, 5e-9)
		if (side != watch.None) != book.Rows[i].Signal {
			t.Errorf("textbook, point %d: out on %s, want signal %v", i+1, side, book.Rows[i].Signal)
		}
		if side != watch.None && first == 0 {
			first = i + 1
		}
	}
	if first != book.FirstSignal {
		t.Errorf("textbook: first signal at %d, want %d", first, book.FirstSignal)
	}

	hb := ref.HandbookEWMA
	e, s = watch.EWMA{Lambda: hb.Parameters.Lambda, L: hb.Parameters.K}, watch.EWMAState{}
	var half float64
	for i, x := range hb.Data {
		var side watch.Side
		half, side = e.Step(&s, (x-hb.Parameters.Target)/hb.Parameters.S, 1)
		average := hb.Parameters.Target + hb.Parameters.S*s.Deviation
		near(t, "handbook printed average", i+1, average, hb.Published.Z[i+1], 0.0051)
		near(t, "handbook average", i+1, average, hb.Computed.Z[i+1], 1e-9)
		near(t, "handbook half-width", i+1, hb.Parameters.S*half, hb.Computed.HalfWidth[i], 1e-9)
		if side != watch.None {
			t.Errorf("handbook, point %d: signal on the %s; the handbook finds none", i+1, side)
		}
	}
	// The printed limits round sqrt(0.3/1.7) to 0.4201.
	near(t, "handbook printed upper limit", 20, hb.Parameters.Target+hb.Parameters.S*half, hb.Published.UCL, 1e-4)
	near(t, "handbook printed lower limit", 20, hb.Parameters.Target-hb.Parameters.S*half, hb.Published.LCL, 1e-4)
}

// The recursion must give the closed form for equal sizes, and for unequal ones
// the variance written out as a sum over all points.
func TestEWMALimitsAreExact(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(11, 12))
	for _, lambda := range []float64{0.05, 0.2, 0.7, 1} {
		e := watch.EWMA{Lambda: lambda, L: 3}
		var equal, unequal watch.EWMAState
		var sizes []float64
		for i := 1; i <= 60; i++ {
			half, _ := e.Step(&equal, 0, 0.2)
			want := 3 * math.Sqrt(0.2*lambda/(2-lambda)*(1-math.Pow(1-lambda, 2*float64(i))))
			near(t, "equal sizes", i, half, want, 1e-12)

			sizes = append(sizes, float64(1+rng.IntN(9)))
			half, _ = e.Step(&unequal, 0, 1/sizes[i-1])
			v := 0.0
			for j, n := range sizes {
				v += lambda * lambda * math.Pow(1-lambda, 2*float64(i-1-j)) / n
			}
			near(t, "unequal sizes", i, half, 3*math.Sqrt(v), 1e-12)
		}
	}
}

func TestHeadStartStartsBothSums(t *testing.T) {
	t.Parallel()
	c := watch.CUSUM{K: 0.5, H: 5, HeadStart: 0.5}
	var s watch.CUSUMState
	c.Step(&s, 0)
	if s.High != 2 || s.Low != 2 {
		t.Errorf("after one point on the centre: %+v, want both sums 2.5 - 0.5", s)
	}
	// With the head start a shift of 1.5 is signalled when 2.5 + i(1.5-0.5) > 5.
	s = watch.CUSUMState{}
	for i := 1; i <= 3; i++ {
		if side := c.Step(&s, 1.5); (side == watch.High) != (i == 3) {
			t.Errorf("point %d: side %s", i, side)
		}
	}
}

func TestExactlyOnALimitIsNotOutside(t *testing.T) {
	t.Parallel()
	var cs watch.CUSUMState
	c := watch.CUSUM{K: 0.5, H: 5}
	for i := 1; i <= 10; i++ {
		// The tenth sum is exactly h; add less than a tie and it stays inside.
		if side := c.Step(&cs, 1+1e-11); side != watch.None {
			t.Errorf("CUSUM, point %d: %s", i, side)
		}
	}
	if side := c.Step(&cs, 0.5+2e-9); side != watch.High {
		t.Errorf("CUSUM above h by two ties: %s", side)
	}
	var es watch.EWMAState
	if _, side := (watch.EWMA{Lambda: 1, L: 3}).Step(&es, 3+0.5e-9, 1); side != watch.None {
		t.Errorf("EWMA on its limit: %s", side)
	}
	if _, side := (watch.EWMA{Lambda: 1, L: 3}).Step(&es, -3-2e-9, 1); side != watch.Low {
		t.Errorf("EWMA below its limit by two ties: %s", side)
	}
}

func TestAccumulatingChartsRefuseBadParameters(t *testing.T) {
	t.Parallel()
	nan, inf := math.NaN(), math.Inf(1)
	for _, e := range []watch.EWMA{{0, 3}, {-0.1, 3}, {1.1, 3}, {nan, 3}, {0.2, 0}, {0.2, -1}, {0.2, inf}, {0.2, nan}} {
		if e.Validate() == nil {
			t.Errorf("%+v was accepted", e)
		}
	}
	for _, c := range []watch.CUSUM{{-0.5, 5, 0}, {nan, 5, 0}, {inf, 5, 0}, {0.5, 0, 0}, {0.5, nan, 0}, {0.5, inf, 0},
		{0.5, 5, -0.1}, {0.5, 5, 1.1}, {0.5, 5, nan}} {
		if c.Validate() == nil {
			t.Errorf("%+v was accepted", c)
		}
	}
	if err := (watch.EWMA{0.2, 3}).Validate(); err != nil {
		t.Error(err)
	}
	if err := (watch.CUSUM{0, 5, 1}).Validate(); err != nil {
		t.Error(err)
	}
}
