package calc

import (
	"errors"
	"fmt"

	"holdfast/internal/spc/limits"
)

var rare = []Topic{
	topic("rare", "Control limits of rare events: good units between them (g) or time between them (t).",
		`{"chart": "g", "values": [31, 12, 58, 7, 40, 22, 64, 19], "limits": "probability"}`, rareEvents),
}

type rareIn struct {
	Chart  limits.Chart `json:"chart"`
	Values []float64    `json:"values"`
	Limits string       `json:"limits,omitempty"`
}

type rareOut struct {
	Center float64   `json:"center"`
	Lower  number    `json:"lower"`
	Upper  number    `json:"upper"`
	Points []float64 `json:"points"`
	Z      []float64 `json:"z"`
}

func rareEvents(in rareIn) (rareOut, error) {
	probability := in.Limits == "probability"
	switch {
	case in.Chart != limits.G && in.Chart != limits.T:
		return rareOut{}, fmt.Errorf("chart must be g or t, not %q", in.Chart)
	case in.Limits != "" && in.Limits != "sigma" && !probability:
		return rareOut{}, fmt.Errorf("limits must be sigma or probability, not %q", in.Limits)
	case in.Chart == limits.T && probability:
		return rareOut{}, errors.New("a t chart has sigma limits only")
	}
	std, err := limits.EstimateRare(in.Chart, in.Values)
	if err != nil {
		return rareOut{}, err
	}
	std.Probability = probability
	band, err := std.Band()
	if err != nil {
		return rareOut{}, err
	}
	out := rareOut{Center: band.Center, Lower: present(band.Lower), Upper: present(band.Upper), Points: in.Values}
	for i, x := range in.Values {
		z, err := std.Z(x)
		if err != nil {
			return rareOut{}, fmt.Errorf("values[%d]: %w", i, err)
		}
		out.Z = append(out.Z, plain(z))
	}
	return out, nil
}
