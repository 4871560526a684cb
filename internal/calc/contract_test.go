package calc_test

import (
	"encoding/json"
	"slices"
	"strings"
	"testing"

	"holdfast/internal/calc"
)

// answer runs a topic and decodes what it answers.
func answer(t *testing.T, topic, in string) map[string]any {
	t.Helper()
	out, err := calc.Run(topic, []byte(in))
	if err != nil {
		t.Fatalf("%s %s: %v", topic, in, err)
	}
	var o map[string]any
	if err := json.Unmarshal(out, &o); err != nil {
		t.Fatal(err)
	}
	return o
}

// TestAnswersKeepTheirKeys holds every topic to the names that scripts rely on.
func TestAnswersKeepTheirKeys(t *testing.T) {
	t.Parallel()
	for topic, keys := range map[string]string{
		"summary":     "n mean sd min median max mean_moving_range median_moving_range lag1",
		"factors":     "d2 d3 c4 median_range A2 A3 B3 B4 D3 D4 E2",
		"range":       "quantile cdf",
		"limits":      "sigma center location dispersion",
		"counts":      "center points lower upper between",
		"rare":        "center lower upper points",
		"ewma":        "z lower upper fired",
		"cusum":       "high low fired",
		"rules":       "fired",
		"runlength":   "arl standard_error method",
		"estimated":   "arl_p10 arl_p50 arl_p90 arl_mean false_alarm standard_error method",
		"changepoint": "after likely size size_se statistic",
		"advice":      "adjust offset interval",
		"setup":       "adjust",
		"adjustments": "gains prompted unprompted ratio interval lag1",
		"capability":  "n mean sigma_within sigma_overall cp cpk pp ppk cpm interval lower_bound expected_ppm observed_ppm",
		"interval":    "standard_error interval lower_bound upper_bound exact",
		"normality":   "anderson_darling adjusted p boxcox_lambda",
		"fit":         "parameters log_likelihood aicc quantiles pp ppk expected_ppm",
		"gauge":       "anova variance percent_of_total percent_tolerance categories pooled",
		"gauge-bias":  "bias sd t p cg cgk",
		"linearity":   "slope intercept r2 p_slope",
		"agreement":   "fleiss_kappa cohen_kappa",
		"lot":         "accept aoq ati aoql aoql_at",
		"lot-double":  "accept asn",
		"lot-plan":    "n c alpha beta",
		"slip":        "suspect candidates",
	} {
		t.Run(topic, func(t *testing.T) {
			t.Parallel()
			found, err := calc.Find(topic)
			if err != nil {
				t.Fatal(err)
			}
			o := answer(t, topic, found.Example)
			for _, k := range strings.Fields(keys) {
				if _, has := o[k]; !has {
					t.Errorf("the answer lacks %s: %v", k, o)
				}
			}
		})
	}
}

// TestWhatDoesNotExistIsNull asks for answers of which a part does not exist.
func TestWhatDoesNotExistIsNull(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct{ topic, in, want string }{
		{"summary", `{"x": [2, 2, 2]}`, `"lag1":null`},
		{"factors", `{"n": 2}`, `"B3":null`},
		{"factors", `{"n": 6}`, `"D3":null`},
		{"range", `{"n": 2, "w": [1]}`, `"quantile":null`},
		{"limits", `{"chart": "individuals", "values": [1, 2, 4, 3]}`, `"points":[null,1,2,1]`},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], [3, 5]]}`, `"lower":[null,null],"upper":[4.8`},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], [3, 4, 6]]}`, `"dispersion":{"center":[`},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], [3]]}`, `"points":[1,null]`},
		{"counts", `{"chart": "c", "counts": [3, 4, 5]}`, `"lower":[null,null,null]`},
		{"counts", `{"chart": "c", "counts": [3, 4, 5]}`, `"between":null`},
		{"rare", `{"chart": "g", "values": [3, 14, 5]}`, `"lower":null`},
		{"estimated", `{"m": 20, "n": 1, "estimator": "mrbar"}`, `"arl_mean":null,`},
		{"capability", `{"values": [1, 2, 3, 5], "upper": 9}`, `"cp":null`},
		{"capability", `{"values": [1, 2, 3, 5], "upper": 9}`, `"expected_ppm":{"below":null,"above":`},
		{"capability", `{"values": [1, 2, 3, 5], "target": 3}`, `"cpk":null,"pp":null,"ppk":null,"cpm":null`},
		{"interval", `{"index": "cp", "value": 1.3, "n": 30}`, `"standard_error":null`},
		{"interval", `{"index": "cp", "value": 1.3, "n": 30}`, `"exact":null`},
		{"normality", `{"x": [-1, 2, 3, 1, 2]}`, `"boxcox_lambda":null`},
		{"fit", `{"x": [1, 2, 3, 1.5], "family": "gamma"}`, `"pp":null,"ppk":null,"expected_ppm":{"below":null,"above":null}`},
		{"gauge", `{"measurements": [[[1, 2], [2, 3]], [[4, 5], [5, 5]]]}`, `"percent_tolerance":null`},
		{"gauge-bias", `{"x": [1, 2, 3], "reference": 2}`, `"cg":null,"cgk":null`},
		{"lot", `{"n": 5, "c": 0, "lot": null, "fractions": [0.1], "model": "binomial"}`, `"ati":null`},
		{"slip", `{"typed": "10.2", "center": 10.2, "sigma": 0.1, "decimals": 1}`, `"candidates":[]`},
		{"rules", `{"z": [0], "rules": [{"kind": "beyond"}]}`, `"fired":[]`},
	} {
		out, err := calc.Run(tc.topic, []byte(tc.in))
		if err != nil || !strings.Contains(string(out), tc.want) {
			t.Errorf("%s %s answers %s, %v; want %s in it", tc.topic, tc.in, out, err, tc.want)
		}
	}
}

// TestWrongInputNamesTheArgument checks the reasons that people read.
func TestWrongInputNamesTheArgument(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct{ topic, in, want string }{
		{"summary", ``, "the input ends before its JSON object does"},
		{"summary", `{"x": [1, 2]`, "the input ends before its JSON object does"},
		{"summary", `[1, 2]`, "the input must be one JSON object"},
		{"summary", `{"x": [1, 2]} {}`, "the input holds something after its JSON object"},
		{"summary", `{"x": [1, NaN]}`, "the input is not JSON: invalid character 'N' looking for beginning of value, at byte 11"},
		{"summary", `{}`, "x is missing"},
		{"summary", `{"X": [1, 2]}`, "x is missing"},
		{"summary", `{"x": [1, 2], "extra": 1}`, `there is no field "extra" here; there are x`},
		{"summary", `{"x": [1, 2], "x": [3, 4]}`, `the field "x" is given twice`},
		{"summary", `{"x": [1, null]}`, "x[1] must be a number"},
		{"summary", `{"x": [1, "2"]}`, "x[1] must be a number"},
		{"summary", `{"x": [1, 1e999]}`, "x[1] is beyond the range of numbers"},
		{"summary", `{"x": 3}`, "x must be a list, as in [...]"},
		{"summary", `{"x": [1]}`, "x: too few readings"},
		{"factors", `{"n": 1}`, "n: "},
		{"factors", `{"n": 2.5}`, "n must be a whole number"},
		{"limits", `{"chart": "bar", "subgroups": [[1, 2]]}`, `chart must be one of xbar-r, xbar-s, median-r, individuals, not "bar"`},
		{"limits", `{"chart": "xbar-r", "values": [1, 2]}`, "a chart of kind xbar-r takes subgroups"},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], [2, 3]], "estimator": "mrbar"}`, "estimator must be one of rbar, sbar, pooled"},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], [2, 3]], "sigma": 1}`, "sigma and center are given together or not at all"},
		{"limits", `{"chart": "xbar-r", "subgroups": [[1, 2], []]}`, "subgroups[1]: "},
		{"counts", `{"chart": "np", "counts": [1, 2], "sizes": [10, 20]}`, "an np chart needs equal sizes"},
		{"counts", `{"chart": "p", "counts": [1, 2], "sizes": [10]}`, "counts and sizes must be equally long, not 2 and 1"},
		{"counts", `{"chart": "c", "counts": [1, 2], "sizes": [10, 10]}`, "a c chart has no sizes"},
		{"rules", `{"z": [1], "rules": [{"kind": "lucky"}]}`, "rules[0]: "},
		{"runlength", `{"rules": [{"kind": "beyond"}]}`, "shifts is missing"},
		{"runlength", `{"rules": [{"kind": "beyond"}], "cusum": {"k": 1, "h": 1}, "shifts": [0]}`, "give exactly one of rules, ewma, cusum"},
		{"runlength", `{"ewma": {"lambda": 0.1, "L": 3, "limits": "wide"}, "shifts": [0]}`, `ewma.limits must be exact or constant, not "wide"`},
		{"runlength", `{"ewma": {"lambda": 0.1, "L": 3, "speed": 1}, "shifts": [0]}`, `there is no field "ewma.speed" here; there are lambda, L, limits`},
		{"changepoint", `{"means": [1, 2], "center": 0}`, "sigma is missing"},
		{"capability", `{"values": [1, 2], "subgroups": [[1, 2]]}`, "give either subgroups or values"},
		{"interval", `{"index": "pp", "value": 1, "n": 10}`, `index must be cp or cpk, not "pp"`},
		{"agreement", `{"ratings": [[null, 1]]}`, "ratings[0][0]: a rating must be a text, a number, true or false"},
		{"lot", `{"n": 5, "c": 0, "fractions": [0.1], "model": "hypergeometric"}`, "the hypergeometric model needs the size of the lot"},
	} {
		out, err := calc.Run(tc.topic, []byte(tc.in))
		if err == nil || out != nil || !strings.HasPrefix(err.Error(), tc.want) {
			t.Errorf("%s %s answers %q, %v; want the reason %q", tc.topic, tc.in, out, err, tc.want)
		}
	}
}

// TestOptionsReachTheirMethods checks what no reference case asks for: identities
// between two ways of asking.
func TestOptionsReachTheirMethods(t *testing.T) {
	t.Parallel()
	data := `[[10.1, 9.9, 10.0], [10.2, 10.0, 9.8], [9.9, 10.1, 10.3]]`
	free := answer(t, "limits", `{"chart": "xbar-s", "subgroups": `+data+`, "estimator": "pooled", "multiple": 2}`)
	asText := func(v any) string { b, _ := json.Marshal(v); return string(b) }
	given := answer(t, "limits", `{"chart": "xbar-s", "subgroups": `+data+`, "multiple": 2, "sigma": `+asText(free["sigma"])+`, "center": `+asText(free["center"])+`}`)
	if asText(free) != asText(given) {
		t.Errorf("the estimated standard gives %s, the same as given %s", asText(free), asText(given))
	}
	// Short runs about one target are the chart itself, moved.
	short := answer(t, "short-run", `{"chart": "xbar-s", "subgroups": `+data+`, "targets": [0, 0, 0], "estimator": "pooled", "multiple": 2}`)
	if asText(free) != asText(short) {
		t.Errorf("the chart is %s, its short run about 0 %s", asText(free), asText(short))
	}
	// Ratings may be called by any name.
	texts := answer(t, "agreement", `{"ratings": [["a", "a"], ["b", "b"], ["a", "b"]]}`)
	numbers := answer(t, "agreement", `{"ratings": [[0, 0], [1, 1], [0, 1]]}`)
	if asText(texts) != asText(numbers) {
		t.Errorf("texts give %s, numbers %s", asText(texts), asText(numbers))
	}
	// A fixed seed: the same question has the same answer.
	in := `{"y": [0.4, -0.6, 0.9, -1.1, 0.3, 0.8], "target": 0, "adjustments": [{"before": 2, "size": 1, "prompted": false}], "seed": 7}`
	if a, b := answer(t, "adjustments", in), answer(t, "adjustments", in); asText(a) != asText(b) {
		t.Errorf("the same seed gives %v and %v", a, b)
	}
	// Whole numbers may be written with a decimal point.
	if asText(answer(t, "factors", `{"n": 5.0}`)) != asText(answer(t, "factors", `{"n": 5}`)) {
		t.Error("n = 5.0 is not n = 5")
	}
	z := answer(t, "rules", `{"z": [3.1, 0, -3.1, 3], "rules": [{"kind": "beyond", "z": 3}, {"kind": "beyond", "z": 2}]}`)
	var fired []string
	for _, f := range z["fired"].([]any) {
		fired = append(fired, asText(f))
	}
	want := []string{`{"index":0,"rule":0}`, `{"index":0,"rule":1}`, `{"index":2,"rule":0}`, `{"index":2,"rule":1}`, `{"index":3,"rule":1}`}
	if !slices.Equal(fired, want) {
		t.Errorf("fired %v, want %v", fired, want)
	}
}

// TestPairThatIsSimulated asks for charts that are not independent: their run length
// cannot be computed, and lies below that of either chart alone.
func TestPairThatIsSimulated(t *testing.T) {
	t.Parallel()
	o := answer(t, "runlength-pair", `{"chart": "individuals", "n": 1, "location": [{"kind": "beyond"}], "dispersion": [{"kind": "beyond"}]}`)
	arl, se := o["arl"].([]any)[0].(float64), o["standard_error"].([]any)[0].(float64)
	if o["method"] != "simulation" || se <= 0 || arl+4*se >= 370.398 || arl <= 1 {
		t.Errorf("got %v; the chart of individuals alone has a run length of 370.4", o)
	}
}
