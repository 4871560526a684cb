package plant

import "testing"

// TestGaugeOffIsAskedAbout: a tenth of the narrowest tolerance (10:1, common practice) is
// still well enough; beyond it, or beyond ten steps without a tolerance, is asked about.
func TestGaugeOffIsAskedAbout(t *testing.T) {
	t.Parallel()
	dec := func(text string) *Decimal {
		if text == "" {
			return nil
		}
		d, err := ParseDecimal(text)
		if err != nil {
			t.Fatal(err)
		}
		return &d
	}
	wide, narrow := Setup{Lower: dec("14.9"), Upper: dec("15.1")}, Setup{Lower: dec("14.982"), Upper: dec("15.000")}
	oneSided := Setup{Upper: dec("6.80")}
	for name, c := range map[string]struct {
		master, reading, resolution string
		measures                    []Setup
		by                          string // "": not asked
	}{
		"on a tenth":            {"15.000", "15.0018", "", []Setup{narrow}, ""},
		"beyond a tenth":        {"15.000", "15.0019", "", []Setup{narrow}, "0.0019"},
		"below the master":      {"15.000", "14.98", "", []Setup{narrow}, "0.020"},
		"the narrowest counts":  {"15.000", "15.010", "", []Setup{wide, narrow, oneSided}, "0.010"},
		"within the wide one":   {"15.000", "15.010", "", []Setup{wide}, ""},
		"ten steps":             {"5.00", "5.10", "0.01", []Setup{oneSided}, ""},
		"beyond ten steps":      {"5.00", "5.11", "0.01", []Setup{oneSided}, "0.11"},
		"tolerance before step": {"15.000", "15.010", "0.001", []Setup{wide}, ""},
		"nothing to compare":    {"5.00", "9.00", "", []Setup{oneSided}, ""},
		"no master":             {"", "9.00", "0.01", []Setup{narrow}, ""},
	} {
		got := GaugeCheckRecord{Master: dec(c.master), Reading: dec(c.reading)}.Off(Gauge{Resolution: dec(c.resolution)}, c.measures)
		switch {
		case got == nil && c.by != "":
			t.Errorf("%s: not asked about", name)
		case got != nil && got.By != c.by:
			t.Errorf("%s: off by %s, want %q", name, got.By, c.by)
		}
	}
}
