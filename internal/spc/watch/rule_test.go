package watch_test

import (
	"encoding/json"
	"fmt"
	"math"
	"reflect"
	"strings"
	"testing"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

func TestRuleWordsAndJSON(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		rule              watch.Rule
		json, words       string
		high, low, spread string
	}{
		{watch.Rule{Kind: watch.Beyond, Z: 3}, `{"kind":"beyond","z":3}`, "beyond 3 sigma",
			"beyond 3 sigma, high side", "beyond 3 sigma, low side", "spread: beyond 3 sigma, high side"},
		{watch.Rule{Kind: watch.KOfM, K: 2, M: 3, Z: 2}, `{"kind":"k-of-m","k":2,"m":3,"z":2}`, "2 of 3 beyond 2 sigma, same side",
			"2 of 3 beyond 2 sigma, high side", "2 of 3 beyond 2 sigma, low side", "spread: 2 of 3 beyond 2 sigma, high side"},
		{watch.Rule{Kind: watch.OneSide, M: 8}, `{"kind":"one-side","m":8}`, "8 on one side",
			"8 on the high side", "8 on the low side", "spread: 8 on the high side"},
		{watch.Rule{Kind: watch.RisingOrFalling, M: 6}, `{"kind":"rising-or-falling","m":6}`, "6 rising or falling",
			"6 rising", "6 falling", "spread: 6 rising"},
		{watch.Rule{Kind: watch.Alternating, M: 14}, `{"kind":"alternating","m":14}`, "14 alternating",
			"14 alternating", "14 alternating", "spread: 14 alternating"},
		{watch.Rule{Kind: watch.Within, M: 15, Z: 1}, `{"kind":"within","m":15,"z":1}`, "15 within 1 sigma",
			"15 within 1 sigma", "15 within 1 sigma", "spread: 15 within 1 sigma"},
		{watch.Rule{Kind: watch.Outside, M: 8, Z: 1.5}, `{"kind":"outside","m":8,"z":1.5}`, "8 outside 1.5 sigma",
			"8 outside 1.5 sigma", "8 outside 1.5 sigma", "spread: 8 outside 1.5 sigma"},
	} {
		got, err := json.Marshal(tc.rule)
		if err != nil || string(got) != tc.json {
			t.Errorf("%v in JSON: %s, %v; want %s", tc.rule, got, err, tc.json)
		}
		var back watch.Rule
		if err := json.Unmarshal([]byte(tc.json), &back); err != nil || back != tc.rule {
			t.Errorf("%s read as %+v, %v", tc.json, back, err)
		}
		if tc.rule.String() != tc.words {
			t.Errorf("%+v is %q, want %q", tc.rule, tc.rule, tc.words)
		}
		for _, d := range []struct{ got, want string }{
			{watch.Describe(tc.rule, watch.High, false), tc.high},
			{watch.Describe(tc.rule, watch.Low, false), tc.low},
			{watch.Describe(tc.rule, watch.High, true), tc.spread},
			{watch.Describe(tc.rule, watch.None, false), tc.words},
		} {
			if d.got != d.want {
				t.Errorf("described as %q, want %q", d.got, d.want)
			}
		}
	}
	var r watch.Rule
	if err := json.Unmarshal([]byte(`{"kind":"beyond"}`), &r); err != nil || r.Z != 3 {
		t.Errorf("beyond without z: %+v, %v; want 3 sigma", r, err)
	}
}

func TestWrongRulesNameTheArgument(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		rule  watch.Rule
		names string
	}{
		{watch.Rule{}, "kind"},
		{watch.Rule{Kind: "sideways", M: 3}, "kind"},
		{watch.Rule{Kind: watch.Beyond}, "z"},
		{watch.Rule{Kind: watch.Beyond, Z: -3}, "z"},
		{watch.Rule{Kind: watch.Beyond, Z: math.NaN()}, "z"},
		{watch.Rule{Kind: watch.Beyond, Z: math.Inf(1)}, "z"},
		{watch.Rule{Kind: watch.Beyond, Z: 3, M: 1}, "m"},
		{watch.Rule{Kind: watch.KOfM, K: 0, M: 3, Z: 2}, "k"},
		{watch.Rule{Kind: watch.KOfM, K: 4, M: 3, Z: 2}, "k"},
		{watch.Rule{Kind: watch.KOfM, K: 2, M: 64, Z: 2}, "m"},
		{watch.Rule{Kind: watch.KOfM, K: 2, M: 0, Z: 2}, "m"},
		{watch.Rule{Kind: watch.KOfM, K: 2, M: 3}, "z"},
		{watch.Rule{Kind: watch.OneSide, M: 1}, "m"},
		{watch.Rule{Kind: watch.OneSide, M: 64}, "m"},
		{watch.Rule{Kind: watch.OneSide, M: 8, Z: 1}, "z"},
		{watch.Rule{Kind: watch.OneSide, M: 8, K: 8}, "k"},
		{watch.Rule{Kind: watch.RisingOrFalling, M: 1}, "m"},
		{watch.Rule{Kind: watch.Alternating, M: 2}, "m"},
		{watch.Rule{Kind: watch.Within, M: 15}, "z"},
		{watch.Rule{Kind: watch.Outside, M: -8, Z: 1}, "m"},
	} {
		err := tc.rule.Validate()
		if err == nil || !strings.HasPrefix(err.Error(), tc.names+":") {
			t.Errorf("%+v: %v; want an error about %s", tc.rule, err, tc.names)
		}
		if _, err := json.Marshal(tc.rule); err == nil {
			t.Errorf("%+v was written as JSON", tc.rule)
		}
	}
	for _, raw := range []string{
		`{}`, `[]`, `"beyond"`, `{"kind":"beyond","z":"3"}`, `{"kind":"beyond","z":0}`, `{"kind":"beyond","z":3,"m":4}`,
		`{"kind":"one-side","m":8,"z":0}`, `{"kind":"one-side","m":8,"k":0}`, `{"kind":"one-side","m":8.5}`,
		`{"kind":"one-side"}`, `{"kind":"k-of-m","k":2,"m":3}`, `{"kind":"one-side","m":8,"side":"high"}`,
		`{"kind":"one-side","m":99999999999999999999}`, `{"kind":"beyond","z":1e999}`,
	} {
		r := watch.Rule{Kind: watch.Beyond, Z: 2}
		if err := json.Unmarshal([]byte(raw), &r); err == nil || r != (watch.Rule{Kind: watch.Beyond, Z: 2}) {
			t.Errorf("%s: read as %+v, %v", raw, r, err)
		}
	}
}

func TestNamedSets(t *testing.T) {
	t.Parallel()
	for name, set := range map[string]struct {
		rules []watch.Rule
		words string
	}{
		"Western Electric (1956)": {watch.WesternElectric(),
			"[beyond 3 sigma 2 of 3 beyond 2 sigma, same side 4 of 5 beyond 1 sigma, same side 8 on one side]"},
		"Nelson (1984)": {watch.Nelson(),
			"[beyond 3 sigma 9 on one side 6 rising or falling 14 alternating 2 of 3 beyond 2 sigma, same side " +
				"4 of 5 beyond 1 sigma, same side 15 within 1 sigma 8 outside 1 sigma]"},
	} {
		if got := fmt.Sprint(set.rules); got != set.words {
			t.Errorf("%s: %s, want %s", name, got, set.words)
		}
		compile(t, set.rules...)
	}
}

func TestDefaultsByChart(t *testing.T) {
	t.Parallel()
	beyond := []watch.Rule{{Kind: watch.Beyond, Z: 3}}
	both := append(beyond, watch.Rule{Kind: watch.OneSide, M: 8})
	for _, tc := range []struct {
		chart      limits.Chart
		n          int
		dispersion bool
		want       []watch.Rule
	}{
		{limits.XBarR, 5, false, watch.WesternElectric()},
		{limits.XBarR, 4, true, both},
		{limits.XBarS, 3, true, beyond},
		{limits.MedianR, 2, true, beyond},
		{limits.Individuals, 1, false, watch.WesternElectric()},
		{limits.Individuals, 1, true, beyond},
		{limits.P, 100, false, both},
		{limits.P, 100, true, nil},
		{limits.G, 1, false, beyond},
		{limits.EWMA, 5, false, nil},
		{limits.CUSUM, 5, false, nil},
		{limits.TSquared, 5, false, beyond},
	} {
		if got := watch.Defaults(tc.chart, tc.n, tc.dispersion); !reflect.DeepEqual(got, tc.want) {
			t.Errorf("%s, n = %d, dispersion %v: %v, want %v", tc.chart, tc.n, tc.dispersion, got, tc.want)
		}
	}
}

// With limits elsewhere than at 3 sigma, the first rule moves with them.
func TestDefaultsSitOnTheLimitThatIsDrawn(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		chart limits.Chart
		panel watch.Panel
		n     int
		want  string
	}{
		{limits.XBarR, watch.PanelLocation, 5, "[beyond 2.5 sigma 2 of 3 beyond 2 sigma, same side 4 of 5 beyond 1 sigma, same side 8 on one side]"},
		{limits.XBarR, watch.PanelDispersion, 5, "[beyond 2.5 sigma 8 on one side]"},
		{limits.XBarR, watch.PanelThird, 5, "[]"},
		{limits.Trend, watch.PanelDispersion, 3, "[beyond 2.5 sigma]"},
		{limits.ThreeWay, watch.PanelLocation, 5, "[beyond 2.5 sigma 2 of 3 beyond 2 sigma, same side 4 of 5 beyond 1 sigma, same side 8 on one side]"},
		{limits.ThreeWay, watch.PanelDispersion, 5, "[beyond 2.5 sigma]"},
		{limits.ThreeWay, watch.PanelThird, 5, "[beyond 2.5 sigma 8 on one side]"},
		{limits.ThreeWay, watch.PanelThird, 3, "[beyond 2.5 sigma]"},
		{limits.Group, watch.PanelLocation, 5, "[beyond 2.5 sigma]"},
		{limits.Group, watch.PanelDispersion, 5, "[beyond 2.5 sigma]"},
		{limits.Group, watch.PanelDispersion, 1, "[]"},
		{limits.LaneyU, watch.PanelLocation, 1, "[beyond 2.5 sigma 8 on one side]"},
		{limits.T, watch.PanelLocation, 1, "[beyond 2.5 sigma]"},
		{limits.T, watch.PanelDispersion, 1, "[]"},
		{limits.TSquared, watch.PanelLocation, 1, "[beyond 3 sigma]"},
		{limits.EWMA, watch.PanelLocation, 5, "[]"},
		{limits.XBarR, watch.Panel(9), 5, "[]"},
	} {
		if got := fmt.Sprint(watch.DefaultsAt(tc.chart, tc.panel, tc.n, 2.5)); got != tc.want {
			t.Errorf("%s, panel %d, n = %d: %s, want %s", tc.chart, tc.panel, tc.n, got, tc.want)
		}
	}
	for _, multiple := range []float64{1.5, 2.5, 3, 3.5} {
		s := watch.Standard{Standard: limits.Standard{Chart: limits.XBarR, Center: 10, Sigma: 1, Multiple: multiple, Probability: true}}
		s.LocationRules = watch.DefaultsAt(s.Chart, watch.PanelLocation, 4, multiple)[:1]
		s.DispersionRules = watch.DefaultsAt(s.Chart, watch.PanelDispersion, 4, multiple)[:1]
		j := judgeOf(t, s)
		location, dispersion, err := s.Bands(4)
		if err != nil {
			t.Fatal(err)
		}
		for _, off := range []float64{-1e-6, 0, 1e-6} {
			var m watch.Memory
			d := j.Step(&m, watch.Subgroup{N: 4, Mean: location.Upper + off, Range: dispersion.Upper + off})
			if d.Err != nil || d.Location.Fired.Any() != (off > 0) || d.Dispersion.Fired.Any() != (off > 0) {
				t.Errorf("multiple %g, %g off both limits: %+v", multiple, off, d)
			}
		}
	}
}

func TestBetterIsTheOtherSide(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		side, worse watch.Side
		want        bool
	}{
		{watch.Low, watch.High, true}, {watch.High, watch.Low, true},
		{watch.High, watch.High, false}, {watch.Low, watch.Low, false},
		{watch.High, watch.None, false}, {watch.None, watch.High, false}, {watch.Both, watch.Low, false},
	} {
		if got := tc.side.Better(tc.worse); got != tc.want {
			t.Errorf("%s with worse %s: better %v, want %v", tc.side, tc.worse, got, tc.want)
		}
	}
}

func FuzzRuleJSON(f *testing.F) {
	for _, r := range ruleZoo() {
		raw, err := json.Marshal(r)
		if err != nil {
			f.Fatal(err)
		}
		f.Add(raw)
	}
	f.Add([]byte(`{"kind":"k-of-m","k":-1,"m":1e3,"z":null}`))
	f.Fuzz(func(t *testing.T, raw []byte) {
		var r watch.Rule
		if json.Unmarshal(raw, &r) != nil {
			return
		}
		if err := r.Validate(); err != nil {
			t.Fatalf("%s was read although it is wrong: %v", raw, err)
		}
		again, err := json.Marshal(r)
		if err != nil {
			t.Fatal(err)
		}
		var back watch.Rule
		if err := json.Unmarshal(again, &back); err != nil || back != r {
			t.Fatalf("%+v came back as %+v, %v", r, back, err)
		}
		compile(t, r)
	})
}
