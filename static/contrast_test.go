package static

import (
	"fmt"
	"math"
	"regexp"
	"strconv"
	"strings"
	"testing"
)

// The floors are those of WCAG 2.2: success criteria 1.4.3 (text, 4.5:1) and
// 1.4.11 (marks and edges, 3:1). Relative luminance as defined there.
func TestContrastOfEveryPairInTokens(t *testing.T) {
	t.Parallel()
	css := string(load()["css/tokens.css"].body)
	day, night := theme(t, css, "day"), theme(t, css, "night")
	line := regexp.MustCompile(`(?m)^\s+(text|mark) (\S+)\s+on (.+)$`)
	listed := line.FindAllStringSubmatch(css, -1)
	if len(listed) < 20 {
		t.Fatalf("tokens.css lists %d lines of pairs", len(listed))
	}
	for _, l := range listed {
		floor := 4.5
		if l[1] == "mark" {
			floor = 3
		}
		for _, cell := range strings.Split(l[3], ", ") {
			ground, printed, ok := strings.Cut(cell, " ")
			if !ok {
				t.Fatalf("unreadable cell %q", cell)
			}
			d, n := contrast(t, day, l[2], ground), contrast(t, night, l[2], ground)
			if got := fmt.Sprintf("%.1f/%.1f", d, n); got != printed {
				t.Errorf("%s on %s is %s, tokens.css says %s", l[2], ground, got, printed)
			}
			if d < floor || n < floor {
				t.Errorf("%s on %s: %.2f by day, %.2f by night, want %.1f", l[2], ground, d, n, floor)
			}
		}
	}
}

func theme(t *testing.T, css, name string) map[string]string {
	t.Helper()
	_, rest, ok := strings.Cut(css, `[data-theme="`+name+`"] {`)
	block, _, ok2 := strings.Cut(rest, "\n}")
	if !ok || !ok2 {
		t.Fatalf("no theme %s", name)
	}
	out := make(map[string]string)
	for _, m := range regexp.MustCompile(`--([\w-]+):\s*#([0-9A-Fa-f]{6})`).FindAllStringSubmatch(block, -1) {
		out[m[1]] = m[2]
	}
	return out
}

func contrast(t *testing.T, theme map[string]string, a, b string) float64 {
	t.Helper()
	x, y := luminance(t, theme[a]), luminance(t, theme[b])
	return (max(x, y) + 0.05) / (min(x, y) + 0.05)
}

func luminance(t *testing.T, hex string) float64 {
	t.Helper()
	v, err := strconv.ParseUint(hex, 16, 32)
	if err != nil || len(hex) != 6 {
		t.Fatalf("colour %q: %v", hex, err)
	}
	part := func(shift uint) float64 {
		c := float64(v>>shift&0xff) / 255
		if c <= 0.04045 {
			return c / 12.92
		}
		return math.Pow((c+0.055)/1.055, 2.4)
	}
	return 0.2126*part(16) + 0.7152*part(8) + 0.0722*part(0)
}
