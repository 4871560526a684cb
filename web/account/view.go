package account

import (
	"net/http"

	"holdfast/internal/auth"
	"holdfast/internal/plant"
	"holdfast/web/ui"
)

// view is the page.
type view struct {
	Name, Login, Badge string
	Roles              []roleView
	ByPIN              bool // let in by a PIN, which opens less
	Less               bool // and there is more that it does not open
	HasSecret, HasPIN  bool
	Password, PIN      block
	Stays              []ui.StayView
	Done               string
	Back               string
}

// block is one of the two forms: what is wrong with it. Secrets are never sent back.
type block struct {
	OldProblem, NewProblem, AgainProblem, Problem string
}

func (b block) any() bool { return b.OldProblem+b.NewProblem+b.AgainProblem+b.Problem != "" }

type roleView struct {
	Name, Does string
	Shut       bool // not opened by the PIN of this session
}

func (s *Surface) render(w http.ResponseWriter, r *http.Request, status int, p plant.Person, v view) error {
	shell := ui.ShellFor(r, ui.Account, ui.FrameOf(r).Words.T("account.title"))
	shell.Path = ui.AccountPath(v.Back)
	t := shell.Words
	v.Name, v.Login, v.Badge, v.HasSecret, v.HasPIN = p.Name, p.Login, p.Badge, p.HasSecret, p.HasPIN
	v.ByPIN = auth.ByPIN(r.Context())
	open := p.Roles
	if v.ByPIN {
		open = p.AtTablet().Roles
	}
	for _, role := range plant.AllRoles {
		if p.Roles.Has(role) {
			shut := !open.Has(role)
			v.Roles = append(v.Roles, roleView{t.T("account.role." + string(role)), t.T("devices.role." + string(role)), shut})
			v.Less = v.Less || shut
		}
	}
	devices, err := s.Store.Devices(r.Context())
	if err != nil {
		return err
	}
	if v.Stays, err = ui.StaysOf(r.Context(), s.Sessions, shell, p.ID, devices); err != nil {
		return err
	}
	return ui.Render(w, r, status, page(shell, v))
}
