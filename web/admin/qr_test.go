package admin

import (
	"fmt"
	"strings"
	"testing"
)

// dark reads a drawing back: the module at (x, y), the quiet zone included.
func (q qrView) dark(t *testing.T) (is func(x, y int) bool) {
	t.Helper()
	set := map[[2]int]bool{}
	for _, run := range strings.Split(strings.TrimPrefix(q.Path, "M"), "M") {
		var x, y, w, back int
		if _, err := fmt.Sscanf(run, "%d %dh%dv1h-%dz", &x, &y, &w, &back); err != nil || back != w {
			t.Fatalf("%q: %v", run, err)
		}
		for i := range w {
			set[[2]int{x + i, y}] = true
		}
	}
	return func(x, y int) bool { return set[[2]int{x, y}] }
}

// TestAQRCodeIsDrawnAsTheStandardSays: ISO/IEC 18004:2015, quoted from memory: a symbol of
// version v has 17+4v modules a side (7.3.1), a quiet zone of four (6.3.8), in three corners
// a finder pattern, which reads 1:1:3:1:1 through its middle (6.3.3), and timing patterns
// that alternate in row and column 6 (6.3.5).
func TestAQRCodeIsDrawnAsTheStandardSays(t *testing.T) {
	t.Parallel()
	q := qrOf("https://10.20.30.40:8443/enrol?code=12345678")
	side := q.Size - 2*quietZone
	if side < 21 || (side-17)%4 != 0 {
		t.Fatalf("%d modules a side", side)
	}
	dark := q.dark(t)
	at := func(x, y int) bool { return dark(x+quietZone, y+quietZone) }
	for y := range q.Size {
		for x := range q.Size {
			if (x < quietZone || y < quietZone || x >= q.Size-quietZone || y >= q.Size-quietZone) && dark(x, y) {
				t.Fatalf("the quiet zone is dark at %d, %d", x, y)
			}
		}
	}
	finder := "1011101"
	for _, corner := range [][2]int{{0, 0}, {side - 7, 0}, {0, side - 7}} {
		var across, down string
		for i := range 7 {
			across += fmt.Sprintf("%c", "01"[map[bool]int{true: 1}[at(corner[0]+i, corner[1]+3)]])
			down += fmt.Sprintf("%c", "01"[map[bool]int{true: 1}[at(corner[0]+3, corner[1]+i)]])
		}
		if across != finder || down != finder {
			t.Errorf("the finder pattern at %v reads %s and %s", corner, across, down)
		}
	}
	for i := 8; i < side-8; i++ {
		if at(i, 6) != (i%2 == 0) || at(6, i) != (i%2 == 0) {
			t.Errorf("the timing pattern is broken at %d", i)
		}
	}
	if q := qrOf(strings.Repeat("x", 5000)); q.Size != 0 {
		t.Error("what no code can hold is drawn")
	}
}
