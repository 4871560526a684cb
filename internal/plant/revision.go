package plant

import (
	"encoding/json"
	"fmt"
	"time"

	"github.com/google/uuid"

	"holdfast/internal/spc/limits"
	"holdfast/internal/spc/watch"
)

// Revision is one version of a characteristic's limits and rules, in force from an
// instant until the next. It is never changed once frozen.
type Revision struct {
	ID             uuid.UUID
	Characteristic uuid.UUID
	Number         int // from 1
	SetupVersion   int
	Chart          limits.Chart
	Estimator      limits.Estimator
	Center         float64 // in the unit
	Sigma          float64 // of a single reading
	Multiple       float64 // limits stand so many sigma from the centre
	Rules          Rules
	Basis          Basis
	Reason         string
	Author         uuid.UUID
	AuthorName     string // for showing, read beside the revision
	FrozenAt       time.Time
	InForceFrom    time.Time
}

// Rules are the run rules that are on, a list for each panel of the chart.
type Rules struct {
	Location   []watch.Rule `json:"location"`
	Dispersion []watch.Rule `json:"dispersion"`
}

// Basis says what data the limits come from.
type Basis struct {
	From      time.Time `json:"from"`
	To        time.Time `json:"to"`
	Subgroups int       `json:"subgroups"` // that were used
	LeftOut   []LeftOut `json:"left_out,omitempty"`

	// Given says that centre and sigma were stated from earlier knowledge and not computed
	// from subgroups on record here: the limits are unproved until a revision from data
	// takes their place.
	Given bool `json:"given,omitempty"`
}

// LeftOut is a subgroup kept out of the limits. There is always a cause.
type LeftOut struct {
	Subgroup uuid.UUID `json:"subgroup"`
	TakenAt  time.Time `json:"taken_at"`
	Cause    string    `json:"cause"`
}

// Standard is what the fold judges by.
func (r Revision) Standard() watch.Standard {
	return watch.Standard{
		Standard:      limits.Standard{Chart: r.Chart, Center: r.Center, Sigma: r.Sigma, Multiple: r.Multiple},
		LocationRules: r.Rules.Location, DispersionRules: r.Rules.Dispersion,
	}
}

// RuleKey is the name under which a rule's firings are kept: the rule itself in
// JSON, so that it says the same in every revision.
func RuleKey(r watch.Rule) string {
	b, err := json.Marshal(r)
	if err != nil {
		panic(fmt.Sprintf("a rule is always JSON: %v", err)) // rules are validated when frozen
	}
	return string(b)
}

// ParseRuleKey reads what RuleKey wrote.
func ParseRuleKey(key string) (watch.Rule, error) {
	var r watch.Rule
	err := json.Unmarshal([]byte(key), &r)
	return r, err
}

// FreezeRequest is what an engineer asks for when freezing limits. What the store
// adds is the number and the instant.
type FreezeRequest struct {
	Characteristic uuid.UUID
	SetupVersion   int // that the study was made under
	After          int // number of the newest revision that the engineer saw, 0 when none
	Estimator      limits.Estimator
	Multiple       float64
	Rules          Rules
	From, To       time.Time // the stretch, both ends included
	LeftOut        []LeftOut
	Reason         string
	InForceFrom    time.Time // zero: now
	Person         uuid.UUID
}
