package desk

import (
	"net/http"
	"net/url"
	"slices"
	"strings"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// Addresses of the reaction plans and of the catalogue of causes.
const (
	plansAddress  = "/desk/plans"
	planAddress   = "/desk/plan"
	causesAddress = "/desk/causes"
)

// plansView is the overview of reaction plans: what is written for what, by kind.
type plansView struct {
	Kinds []string
	Rows  []planRow
	All   []planChoice // characteristics, for one that has no plan of its own yet
	Every []planChoice // kinds
	May   bool
}

// planRow is what one scope has for each kind.
type planRow struct {
	Name  string
	Sub   string
	Cells []planCell
}

type planCell struct {
	Text string
	Href string
	Own  bool // written for this scope; otherwise what counts instead
}

type planChoice struct {
	Value, Name string
	Chosen      bool
}

// planPath is the page of one plan.
func planPath(scope plant.PlanScope, kind plant.MatterKind) string {
	q := url.Values{"kind": {string(kind)}}
	if scope.Characteristic != uuid.Nil {
		q.Set("characteristic", scope.Characteristic.String())
	}
	if scope.Family != "" {
		q.Set("family", scope.Family)
	}
	return withQuery(planAddress, q)
}

// scopes is everything that a plan may be written for.
type scopes struct {
	families        []string
	characteristics []plant.CharacteristicState
	stations        map[uuid.UUID]plant.Station // by characteristic
}

func (d *Desk) scopes(r *http.Request) (scopes, error) {
	s := scopes{stations: map[uuid.UUID]plant.Station{}}
	states, err := d.store.StationStates(r.Context(), 1)
	if err != nil {
		return s, err
	}
	for _, st := range states {
		if st.Family != "" && !slices.Contains(s.families, st.Family) {
			s.families = append(s.families, st.Family)
		}
		for _, c := range st.Characteristics {
			s.characteristics = append(s.characteristics, c)
			s.stations[c.ID] = st.Station
		}
	}
	slices.Sort(s.families)
	return s, nil
}

// wider are the scopes that count for one where it has no plan, the narrowest first.
func (s scopes) wider(scope plant.PlanScope) []plant.PlanScope {
	var out []plant.PlanScope
	if scope.Characteristic != uuid.Nil {
		if family := s.stations[scope.Characteristic].Family; family != "" {
			out = append(out, plant.PlanScope{Family: family})
		}
	}
	if scope != (plant.PlanScope{}) {
		out = append(out, plant.PlanScope{})
	}
	return out
}

// name says what a scope is, "" when there is no such thing.
func (s scopes) name(f ui.Format, scope plant.PlanScope) string {
	switch {
	case scope.Characteristic != uuid.Nil:
		for _, c := range s.characteristics {
			if c.ID == scope.Characteristic {
				return f.Words.T("plan.scope-characteristic", s.stations[c.ID].Name, c.Name)
			}
		}
		return ""
	case scope.Family != "":
		if !slices.Contains(s.families, scope.Family) {
			return ""
		}
		return f.Words.T("plan.scope-family", scope.Family)
	}
	return f.Words.T("plan.scope-plant")
}

// newestPlan is the newest version of one plan that is not withdrawn.
func newestPlan(plans []plant.ReactionPlan, scope plant.PlanScope, kind plant.MatterKind) *plant.ReactionPlan {
	for i := range plans {
		if p := &plans[i]; p.Scope == scope && p.Kind == kind && !p.Withdrawn {
			return p
		}
	}
	return nil
}

func (d *Desk) showPlans(w http.ResponseWriter, r *http.Request) error {
	plans, err := d.store.Plans(r.Context())
	if err != nil {
		return err
	}
	s, err := d.scopes(r)
	if err != nil {
		return err
	}
	f := ui.FrameOf(r).Format()
	v := plansView{May: ui.FrameOf(r).Person.May(plant.SetLimits)}
	for _, k := range plant.MatterKinds {
		v.Kinds = append(v.Kinds, ui.MatterKindWord(f.Words, k))
		v.Every = append(v.Every, planChoice{Value: string(k), Name: ui.MatterKindWord(f.Words, k)})
	}
	add := func(scope plant.PlanScope, name, sub string) {
		row := planRow{Name: name, Sub: sub}
		for _, k := range plant.MatterKinds {
			row.Cells = append(row.Cells, newCell(f, s, plans, scope, k))
		}
		v.Rows = append(v.Rows, row)
	}
	add(plant.PlanScope{}, f.Words.T("plan.scope-plant"), f.Words.T("plan.plant-note"))
	for _, family := range s.families {
		add(plant.PlanScope{Family: family}, f.Words.T("plan.scope-family", family), "")
	}
	for _, c := range s.characteristics {
		scope := plant.PlanScope{Characteristic: c.ID}
		v.All = append(v.All, planChoice{Value: c.ID.String(), Name: s.name(f, scope)})
		if slices.ContainsFunc(plans, func(p plant.ReactionPlan) bool { return p.Scope == scope && !p.Withdrawn }) {
			add(scope, c.Name, s.stations[c.ID].Name)
		}
	}
	shell := ui.ShellFor(r, ui.Desk, f.Words.T("plan.title"))
	shell.Bar = bar(f.Words, uuid.Nil, false, "plans")
	shell.Styles = append(shell.Styles, "css/reaction.css")
	return ui.Render(w, r, http.StatusOK, plansPage(shell, v))
}

func newCell(f ui.Format, s scopes, plans []plant.ReactionPlan, scope plant.PlanScope, kind plant.MatterKind) planCell {
	cell := planCell{Href: planPath(scope, kind)}
	if p := newestPlan(plans, scope, kind); p != nil {
		cell.Own, cell.Text = true, f.Words.T("plan.steps", len(p.Steps))
		var and []string
		if p.Confirm {
			and = append(and, f.Words.T("plan.with-confirm"))
		}
		if p.Verify {
			and = append(and, f.Words.T("plan.with-verify"))
		}
		if len(and) > 0 {
			cell.Text = f.Words.T("plan.steps-and", cell.Text, strings.Join(and, ", "))
		}
		return cell
	}
	cell.Text = f.Words.T("plan.none")
	for _, w := range s.wider(scope) {
		if newestPlan(plans, w, kind) != nil {
			if cell.Text = f.Words.T("plan.as-plant"); w.Family != "" {
				cell.Text = f.Words.T("plan.as-family")
			}
			break
		}
	}
	return cell
}
