package capability_test

import (
	"encoding/binary"
	"errors"
	"math"
	"math/rand/v2"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/spc/capability"
	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/sample"
)

func sortedCopy(x []float64) []float64 {
	s := slices.Clone(x)
	slices.Sort(s)
	return s
}

// Wrong input is an error that names the argument and the reason.
func TestWrongInputIsNamed(t *testing.T) {
	t.Parallel()
	ok := []float64{1, 2, 3, 4, 5}
	assess := func(x []float64, s capability.Specification, o capability.Options) error {
		_, err := capability.Assess(capability.Singles(x), s, o)
		return err
	}
	fit := func(f capability.Family, x ...float64) error {
		_, err := capability.FitFamily(f, x)
		return err
	}
	both := capability.Specification{Lower: at(0), Upper: at(6)}
	_, boxcox := capability.FitBoxCox([]float64{1, 2, -3, 4})
	// Twelfth roots: the power that undoes them is far above 5.
	var roots []float64
	for i := range 40 {
		roots = append(roots, math.Pow(float64(i+1), 1.0/12))
	}
	_, boxcoxEnd := capability.FitBoxCox(roots)
	_, known := capability.Known(capability.Weibull, 1)
	_, shape := capability.Known(capability.Weibull, -1, 2)
	_, _, cpk := capability.CpkBounds(1, 1, 5, 0.95)
	_, unit := capability.ExactBounds(1e9, 100, 99, 0.95)
	_, tolerance := capability.OneSidedToleranceFactor(10, 1, 0.95)
	for _, c := range []struct {
		err   error
		kind  error
		words string
	}{
		{assess(ok, capability.Specification{}, capability.Options{}), capability.ErrInput, "no specification limit"},
		{assess(ok, capability.Specification{Lower: at(6), Upper: at(0)}, capability.Options{}), capability.ErrInput, "lower specification limit 6 must be below"},
		{assess(ok, capability.Specification{Upper: at(math.NaN())}, capability.Options{}), capability.ErrInput, "upper specification limit must be a finite"},
		{assess(ok, capability.Specification{Upper: at(1), Target: at(math.Inf(1))}, capability.Options{}), capability.ErrInput, "target"},
		{assess([]float64{1, math.NaN()}, both, capability.Options{}), sample.ErrNotFinite, "reading 2"},
		{assess([]float64{1}, both, capability.Options{}), sample.ErrTooFew, "at least 2"},
		{assess([]float64{3, 3, 3}, both, capability.Options{}), sample.ErrZeroSpread, "equal"},
		{assess(ok, both, capability.Options{Confidence: 2}), capability.ErrInput, "confidence"},
		{assess(ok, both, capability.Options{Estimator: "best"}), capability.ErrInput, `no estimator "best"`},
		{assess(ok, both, capability.Options{Estimator: limits.Pooled}), limits.ErrInput, "two readings or more"},
		{fit(capability.Weibull, 1, 2, -3, 4), capability.ErrInput, "reading 3 is -3"},
		{fit(capability.Rayleigh, 1, 2, 0, 4), capability.ErrInput, "reading 3 is 0"},
		{fit(capability.FoldedNormal, 1, 2, -3, 4), capability.ErrInput, "no readings below zero"},
		{fit(capability.Normal, 1, 2, 3), sample.ErrTooFew, "at least 4"},
		{fit("cauchy", ok...), capability.ErrInput, `no family "cauchy"`},
		{boxcox, capability.ErrInput, "reading 3 is -3"},
		{boxcoxEnd, capability.ErrInput, "no power"},
		{known, capability.ErrInput, "2 parameters, got 1"},
		{shape, capability.ErrInput, "shape"},
		{cpk, capability.ErrInput, "at least 2 readings"},
		{unit, capability.ErrInput, "same unit"},
		{tolerance, capability.ErrInput, "coverage"},
	} {
		if c.err == nil || !errors.Is(c.err, c.kind) || !strings.Contains(c.err.Error(), c.words) {
			t.Errorf("got %v, want words %q", c.err, c.words)
		}
	}
	if _, err := (capability.Fit{}).Quantile(0.5); err == nil {
		t.Error("an empty fit has quantiles")
	}
}

// FitAll keeps the families that the readings admit and names the others.
func TestFitAllNamesWhatItLeavesOut(t *testing.T) {
	t.Parallel()
	fits, refused, err := capability.FitAll([]float64{-1, 0, 1, 2, 5})
	if err != nil || len(fits) != 1 || fits[0].Family != capability.Normal || len(refused) != 5 {
		t.Errorf("%d fits, %d refused, %v", len(fits), len(refused), err)
	}
	fits, refused, err = capability.FitAll([]float64{0, 0.2, 1, 2, 5})
	if err != nil || len(fits) != 2 || len(refused) != 4 {
		t.Errorf("with a zero: %d fits, %d refused, %v", len(fits), len(refused), err)
	}
}

func floats(data []byte) []float64 {
	var out []float64
	for len(data) >= 8 && len(out) < 200 {
		out = append(out, math.Float64frombits(binary.LittleEndian.Uint64(data)))
		data = data[8:]
	}
	return out
}

func bytesOf(x ...float64) (b []byte) {
	for _, v := range x {
		b = binary.LittleEndian.AppendUint64(b, math.Float64bits(v))
	}
	return b
}

func FuzzAssess(f *testing.F) {
	f.Add(bytesOf(1, 2, 3, 4, 5, 6), 0.0, 7.0, 3.0, 0.95, 2)
	f.Add(bytesOf(1e308, -1e308, 5, 5), -1e308, 1e308, 0.0, 0.5, 1)
	f.Add(bytesOf(1, 1+1e-15, 1, 1), 0.5, 1e300, 1.0, 0.999999, 2)
	f.Fuzz(func(t *testing.T, data []byte, lower, upper, target, confidence float64, size int) {
		x := floats(data)
		size = min(max(size, 1), 10)
		var groups []capability.Subgroup
		for i := 0; i < len(x); i += size {
			groups = append(groups, capability.Subgroup{Readings: x[i:min(i+size, len(x))], Break: i%7 == 6})
		}
		for _, spec := range []capability.Specification{{Lower: &lower, Upper: &upper, Target: &target}, {Lower: &lower}, {Upper: &upper}} {
			for _, e := range []limits.Estimator{"", limits.RBar, limits.SBar, limits.MedianMR} {
				s, err := capability.Assess(groups, spec, capability.Options{Confidence: confidence, Estimator: e})
				if err != nil {
					continue
				}
				all := []float64{s.Mean, s.SigmaOverall, s.SigmaWithin, s.DFWithin}
				for _, i := range []*capability.Index{s.Cp, s.Cpk, s.Pp, s.Ppk} {
					if i != nil {
						all = append(all, i.Value, i.Interval.Low, i.Interval.High, i.LowerBound)
					}
				}
				for _, v := range []*float64{s.Cpm, s.Expected.Below, s.Expected.Above, s.Observed.Below, s.Observed.Above} {
					if v != nil {
						all = append(all, *v)
					}
				}
				allFinite(t, all)
			}
		}
	})
}

func allFinite(t *testing.T, all []float64) {
	t.Helper()
	for _, v := range all {
		if math.IsNaN(v) || math.IsInf(v, 0) {
			t.Fatalf("not finite without an error: %v", all)
		}
	}
}

func FuzzFit(f *testing.F) {
	f.Add(bytesOf(1, 2, 3, 4, 5, 6), 0.01, 7.0)
	f.Add(bytesOf(1e-300, 1e300, 1, 2), 0.01, 7.0)
	f.Add(bytesOf(1, 1+1e-12, 1, 1), 0.5, 2.0)
	f.Add(bytesOf(0, 0, 0, 1), 0.5, 2.0)
	f.Fuzz(func(t *testing.T, data []byte, lower, upper float64) {
		x := floats(data)
		fits, _, err := capability.FitAll(x)
		if err == nil {
			for _, fit := range fits {
				all := []float64{fit.LogLikelihood, fit.AICc, fit.AndersonDarling}
				for _, p := range fit.Parameters {
					all = append(all, p.Value)
				}
				if p, err := fit.Percentile(capability.Specification{Lower: &lower, Upper: &upper}); err == nil {
					all = append(all, p.X0135, p.X50, p.X99865, *p.Pp, *p.Ppk, *p.Expected.Below, *p.Expected.Above)
				}
				allFinite(t, all)
			}
		}
		b, err := capability.FitBoxCox(x)
		if err != nil {
			return
		}
		allFinite(t, []float64{b.Lambda, b.LogLikelihood})
		if pp, ppk, err := b.Indices(x, capability.Specification{Lower: &lower, Upper: &upper}); err == nil {
			allFinite(t, []float64{*ppk})
			if pp != nil {
				allFinite(t, []float64{*pp})
			}
		}
	})
}

// 100,000 readings in subgroups of five, the study and all families.
func BenchmarkCapability(b *testing.B) {
	rng := rand.New(rand.NewPCG(3, 3))
	groups := make([]capability.Subgroup, 20_000)
	var x []float64
	for i := range groups {
		for range 5 {
			groups[i].Readings = append(groups[i].Readings, math.Abs(10+rng.NormFloat64()))
		}
		x = append(x, groups[i].Readings...)
	}
	spec := capability.Specification{Lower: at(6), Upper: at(14), Target: at(10)}
	b.ReportAllocs()
	for b.Loop() {
		if _, err := capability.Assess(groups, spec, capability.Options{}); err != nil {
			b.Fatal(err)
		}
		fits, refused, err := capability.FitAll(x)
		if err != nil || len(refused) > 0 {
			b.Fatal(err, refused)
		}
		if _, err := fits[0].Percentile(spec); err != nil {
			b.Fatal(err)
		}
		if _, err := capability.FitBoxCox(x); err != nil {
			b.Fatal(err)
		}
	}
}
