package calc

import (
	"fmt"

	"holdfast/internal/spc/slip"
)

var entries = []Topic{
	topic("slip", "Whether a typed reading may be a slip of the hand, and what one slip would explain it.",
		`{"typed": "1024", "center": 10.2, "sigma": 0.05, "decimals": 2}`, readingSlip),
}

type slipIn struct {
	Typed    string  `json:"typed"`
	Center   float64 `json:"center"`
	Sigma    float64 `json:"sigma"`
	Decimals int     `json:"decimals"`
}

type slipOut struct {
	Suspect    bool     `json:"suspect"`
	Candidates []string `json:"candidates"`
}

func readingSlip(in slipIn) (slipOut, error) {
	expected, err := slip.AroundCenter(in.Center, in.Sigma)
	if err != nil {
		return slipOut{}, err
	}
	f, err := expected.Check(in.Typed, in.Decimals)
	if err != nil {
		return slipOut{}, fmt.Errorf("typed: %w", err)
	}
	return slipOut{Suspect: f.Suspect, Candidates: list(f.Candidates)}, nil
}
