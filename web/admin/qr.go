package admin

import (
	"fmt"
	"strings"

	"rsc.io/qr"
)

// qrView is a QR code (ISO/IEC 18004) as a drawing: dark modules in a square of Size
// modules, the quiet zone of four around it included.
type qrView struct {
	Size int
	Path string
}

const quietZone = 4

// qrOf encodes an address. What is too long for a code gives none.
func qrOf(address string) qrView {
	code, err := qr.Encode(address, qr.M)
	if err != nil {
		return qrView{}
	}
	var path strings.Builder
	for y := range code.Size {
		for x := 0; x < code.Size; x++ {
			from := x
			for x < code.Size && code.Black(x, y) {
				x++
			}
			if x > from {
				fmt.Fprintf(&path, "M%d %dh%dv1h-%dz", from+quietZone, y+quietZone, x-from, x-from)
			}
		}
	}
	return qrView{code.Size + 2*quietZone, path.String()}
}

func (q qrView) box() string { return fmt.Sprintf("0 0 %d %d", q.Size, q.Size) }
