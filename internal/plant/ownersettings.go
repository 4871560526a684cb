package plant

// OwnerSettings say when a characteristic counts as stable and as capable, from which
// follows who must act on it.
type OwnerSettings struct {
	StableSubgroups int     // without an open matter before it counts as stable
	HoldsCount      bool    // a closed matter that had only readings outside specification counts as instability
	Capable         float64 // the least lower 95 % bound of Ppk that is capable
	Accepted        float64 // the least with the mark accepted
	LeastReadings   int     // that a capability claim needs
	LeastSubgroups  int     // that they must come from
	Window          int     // newest subgroups that the figure of the moment is computed from
}

// The defaults are common practice: 25 subgroups and 100 readings before a claim, 1.33
// as the usual demand, 1.00 as what a customer may be asked to concede.
var defaultOwnerSettings = OwnerSettings{
	StableSubgroups: 25, Capable: 1.33, Accepted: 1.00, LeastReadings: 100, LeastSubgroups: 25, Window: 125,
}

// MaxWindow bounds the subgroups that a figure of the moment is computed from.
const MaxWindow = 500

// OwnerSettingsTable lists the settings of routing.
var OwnerSettingsTable = []SettingField{
	{Key: "owner.stable-subgroups", Unit: "subgroups", Least: 1, Most: MaxWindow, Field: func(s *Settings) any { return &s.Owner.StableSubgroups }},
	{Key: "owner.holds-count", Field: func(s *Settings) any { return &s.Owner.HoldsCount }},
	{Key: "owner.capable", Decimals: 2, Least: 0.5, Most: 5, Field: func(s *Settings) any { return &s.Owner.Capable }},
	{Key: "owner.accepted", Decimals: 2, Least: 0.3, Most: 5, Field: func(s *Settings) any { return &s.Owner.Accepted }},
	{Key: "owner.least-readings", Unit: "readings", Least: 10, Most: 2000, Field: func(s *Settings) any { return &s.Owner.LeastReadings }},
	{Key: "owner.least-subgroups", Unit: "subgroups", Least: 2, Most: MaxWindow, Field: func(s *Settings) any { return &s.Owner.LeastSubgroups }},
	{Key: "owner.window", Unit: "subgroups", Least: 25, Most: MaxWindow, Field: func(s *Settings) any { return &s.Owner.Window }},
}

func (o OwnerSettings) check() error {
	switch {
	case o.Accepted > o.Capable:
		return Invalidf("owner.accepted", "What is accepted with a mark cannot lie above what counts as capable.")
	case o.LeastSubgroups > o.Window:
		return Invalidf("owner.window", "The figure must look at no fewer subgroups than a claim needs.")
	}
	return nil
}
