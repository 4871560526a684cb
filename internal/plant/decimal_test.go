package plant_test

import (
	"math"
	"math/big"
	"strings"
	"testing"

	"holdfast/internal/plant"
)

func TestParseReading(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		text     string
		decimals int
		want     int64
		ok       bool
	}{
		{"14.994", 3, 14994, true},
		{"14,994", 3, 14994, true}, // comma and point are both decimal signs
		{" 14.9 ", 3, 14900, true}, // fewer decimals are filled up
		{"14.9940", 3, 14994, true},
		{"15", 3, 15000, true},
		{"15.", 3, 15000, true},
		{".5", 1, 5, true},
		{"-0.25", 2, -25, true},
		{"\u22120,25", 2, -25, true}, // a true minus sign
		{"+3", 0, 3, true},
		{"14.9945", 3, 0, false}, // rounding is not ours to do
		{"1.5", 0, 0, false},
		{"", 3, 0, false},
		{"-", 3, 0, false},
		{".", 3, 0, false},
		{"1.2.3", 3, 0, false},
		{"1,234.5", 3, 0, false}, // grouping is not guessed at
		{"NaN", 3, 0, false},
		{"Inf", 3, 0, false},
		{"1e400", 3, 0, false},
		{"1e3", 3, 0, false},
		{"0x10", 3, 0, false},
		{"12a", 3, 0, false},
		{"९", 0, 0, false},
		{"999999999999", 0, 999999999999, true},
		{"1000000000000", 0, 0, false},
		{"99999999999999999999", 0, 0, false},
		{strings.Repeat("9", 1000), 3, 0, false},
	} {
		got, err := plant.ParseReading(tc.text, tc.decimals)
		if (err == nil) != tc.ok || got != tc.want {
			t.Errorf("ParseReading(%q, %d) = %d, %v; want %d, ok %v", tc.text, tc.decimals, got, err, tc.want, tc.ok)
		}
		if err != nil && !plant.IsKind(err, plant.Invalid) {
			t.Errorf("ParseReading(%q): %v is not for people", tc.text, err)
		}
	}
}

func TestParseDeviation(t *testing.T) {
	t.Parallel()
	target := plant.Decimal{Units: 14991, Decimals: 3}
	for text, want := range map[string]int64{"+3": 14994, "-12": 14979, "0": 14991, "3": 14994} {
		if got, err := plant.ParseDeviation(text, 3, target); err != nil || got != want {
			t.Errorf("ParseDeviation(%q) = %d, %v; want %d", text, got, err, want)
		}
	}
	if _, err := plant.ParseDeviation("0.003", 3, target); err == nil {
		t.Error("a deviation with decimals was accepted: it is typed in the last digit")
	}
}

// FuzzParseReading compares with exact rational arithmetic and demands a round trip.
func FuzzParseReading(f *testing.F) {
	for _, s := range []string{"14.994", "-0,25", "1e400", "NaN", "--1", "0.", "\u22121"} {
		f.Add(s, 3)
	}
	f.Fuzz(func(t *testing.T, text string, decimals int) {
		if decimals < 0 || decimals > plant.MaxDecimals {
			return
		}
		got, err := plant.ParseReading(text, decimals)
		if err != nil {
			return
		}
		clean := strings.NewReplacer(",", ".", "\u2212", "-").Replace(strings.TrimSpace(text))
		want, ok := new(big.Rat).SetString(clean)
		if !ok {
			t.Fatalf("accepted %q, which is no number", text)
		}
		if new(big.Rat).SetFrac(big.NewInt(got), new(big.Int).Exp(big.NewInt(10), big.NewInt(int64(decimals)), nil)).Cmp(want) != 0 {
			t.Fatalf("ParseReading(%q, %d) = %d", text, decimals, got)
		}
		if again, err := plant.ParseReading(plant.FormatUnits(got, decimals), decimals); err != nil || again != got {
			t.Fatalf("%d is written as %q and read as %d, %v", got, plant.FormatUnits(got, decimals), again, err)
		}
	})
}

func TestDecimalsCompareExactly(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		a, b string
		want int
	}{{"15.000", "15", 0}, {"0.1", "0.10000", 0}, {"-0.5", "0.5", -1}, {"14.982", "14.9820001", 0}, {"999999999999", "0.000001", 1}} {
		a, errA := plant.ParseDecimal(tc.a)
		b, errB := plant.ParseDecimal(tc.b)
		if tc.b == "14.9820001" {
			if errB == nil {
				t.Error("more decimals than are kept were accepted")
			}
			continue
		}
		if errA != nil || errB != nil || a.Compare(b) != tc.want || b.Compare(a) != -tc.want {
			t.Errorf("%s against %s: %d, want %d (%v, %v)", tc.a, tc.b, a.Compare(b), tc.want, errA, errB)
		}
	}
}

func TestFormatFloatHasNoMinusZero(t *testing.T) {
	t.Parallel()
	for v, want := range map[float64]string{-0.00001: "0.000", 0.0005: "0.001", -1.5: "-1.500", math.NaN(): "", math.Inf(1): ""} {
		if got := plant.FormatFloat(v, 3); got != want {
			t.Errorf("FormatFloat(%v) = %q, want %q", v, got, want)
		}
	}
}
