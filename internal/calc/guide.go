package calc

import (
	"holdfast/internal/spc/guide"
	"holdfast/internal/spc/limits"
)

var guides = []Topic{
	topic("guide", "Which chart suits a characteristic, and why.",
		`{"measured": "readings", "subgroup_size": 5}`, chartGuide),
}

type guideIn struct {
	Measured        guide.Measured `json:"measured"`
	SubgroupSize    int            `json:"subgroup_size,omitempty"`
	SizeVaries      bool           `json:"size_varies,omitempty"`
	Streams         int            `json:"streams,omitempty"`
	Batches         guide.Batches  `json:"batches,omitempty"`
	BetweenP        number         `json:"between_p"`
	EventRate       number         `json:"event_rate"`
	BetweenSigma    number         `json:"between_sigma"`
	Parts           int            `json:"parts,omitempty"`
	SpreadDiffers   bool           `json:"spread_differs,omitempty"`
	Characteristics int            `json:"characteristics,omitempty"`
	Wear            bool           `json:"wear,omitempty"`
	SmallShift      float64        `json:"small_shift,omitempty"`
	ShiftKnown      bool           `json:"shift_known,omitempty"`
	ByHand          bool           `json:"by_hand,omitempty"`
}

type guideOut struct {
	Chart limits.Chart `json:"chart"`
	// Form is what is done to readings first, deviation or standardised; null for none.
	Form *guide.Form `json:"form"`
	Why  string      `json:"why"`
}

func chartGuide(in guideIn) (guideOut, error) {
	c := guide.Case(in)
	if c.Batches == "" {
		c.Batches = guide.Pieces
	}
	a, err := guide.Choose(c)
	out := guideOut{Chart: a.Chart, Why: a.Why}
	if a.Form != guide.Plain {
		out.Form = &a.Form
	}
	return out, err
}
