package capability

// Requirement is what a plant asks for before a capability figure is shown as a
// claim. The zero value asks for the usual: 100 readings over 25 subgroups.
//
// Source: common practice.
type Requirement struct {
	Readings, Subgroups int // at least; 0 means 100 and 25
}

// Evidence is what is known about the readings of a study.
type Evidence struct {
	// Stable tells that the stretch has no signal without a removed cause. Only
	// the caller knows it.
	Stable              bool
	Readings, Subgroups int
	// GaugeKnown tells that the gauge's share of the spread has been studied.
	GaugeKnown bool
}

// Lack is one thing that keeps a figure from being a claim.
type Lack string

const (
	NotStable       Lack = "not-stable"
	TooFewReadings  Lack = "too-few-readings"
	TooFewSubgroups Lack = "too-few-subgroups"
	GaugeUnknown    Lack = "gauge-unknown"
)

// Shortfall is a Lack with its figures; both are 0 where the lack has none.
type Shortfall struct {
	Lack      Lack
	Got, Need int
}

// Missing lists what is lacking, the gravest first; empty means that the figure may
// be shown as a claim.
func (r Requirement) Missing(e Evidence) []Shortfall {
	if r.Readings == 0 {
		r.Readings = 100
	}
	if r.Subgroups == 0 {
		r.Subgroups = 25
	}
	var out []Shortfall
	if !e.Stable {
		out = append(out, Shortfall{Lack: NotStable})
	}
	if e.Readings < r.Readings {
		out = append(out, Shortfall{TooFewReadings, e.Readings, r.Readings})
	}
	if e.Subgroups < r.Subgroups {
		out = append(out, Shortfall{TooFewSubgroups, e.Subgroups, r.Subgroups})
	}
	if !e.GaugeKnown {
		out = append(out, Shortfall{Lack: GaugeUnknown})
	}
	return out
}
