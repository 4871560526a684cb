package changepoint_test

import (
	"encoding/binary"
	"math"
	"testing"

	"holdfast/internal/spc/changepoint"
)

// floats cuts raw bytes into numbers, so that the fuzzer reaches NaN,
// infinities and denormal values too.
func floats(data []byte) []float64 {
	var out []float64
	for len(data) >= 8 && len(out) < 512 {
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

func FuzzChangepoint(f *testing.F) {
	f.Add(bytesOf(1, 2, 3, 9, 8), 2.0, 0.5, 4)
	f.Add(bytesOf(0, 0, 0), 0.5, 1e-3, 1)
	f.Add(bytesOf(math.MaxFloat64, -math.MaxFloat64), 1e308, 1e-308, 2)
	f.Fuzz(func(t *testing.T, data []byte, center, sigma float64, size int) {
		x := floats(data)
		sizes, units := make([]int, len(x)), make([]float64, len(x))
		for i := range x {
			sizes[i] = size
			units[i] = sigma * float64(1+i%3)
		}
		check := func(e changepoint.Estimate, err error) {
			t.Helper()
			if err != nil {
				return
			}
			for _, v := range []float64{e.Level, e.Size, e.SizeSE, e.Statistic} {
				if math.IsNaN(v) || math.IsInf(v, 0) {
					t.Fatalf("not finite without an error: %+v", e)
				}
			}
			if e.After < -1 || e.After >= len(x)-1 || len(e.Likely) == 0 || e.Statistic < 0 {
				t.Fatalf("impossible estimate %+v for %d subgroups", e, len(x))
			}
		}
		check(changepoint.Location(x, nil, center, sigma))
		check(changepoint.Location(x, sizes, center, sigma))
		check(changepoint.Dispersion(x, sizes, sigma, math.Abs(center)))
		check(changepoint.Dispersion(x, sizes, sigma, 0))
		check(changepoint.Poisson(x, nil, center))
		check(changepoint.Poisson(x, units, center))
		check(changepoint.Binomial(x, units, center))
	})
}

func BenchmarkLocation512(b *testing.B) {
	x := make([]float64, 512)
	for i := range x {
		x[i] = math.Sin(float64(i))
	}
	for b.Loop() {
		if _, err := changepoint.Location(x, nil, 0, 1); err != nil {
			b.Fatal(err)
		}
	}
}
