package desk

import (
	"errors"
	"net/http"
	"net/url"
	"strconv"

	"github.com/google/uuid"

	"holdfast/internal/plant"
	"holdfast/web/ui"
	"holdfast/web/words"
)

// settingsView is the page of the numbers of the plant that an engineer may change.
type settingsView struct {
	Groups   []settingGroup
	May      bool // change them
	ID       string
	Replaces int
	Reason   string
	Problems map[string]string
	Conflict string
	Saved    string
	Versions []settingsVersion
}

type settingGroup struct {
	ID, Name, Meaning string
	Rows              []settingRow
}

type settingRow struct {
	Key, Name, Meaning string
	Value              string
	Switch             bool
	Unit               string
	Default            string
	Changed            bool // it is not the default
	Problem            string
}

// settingsVersion is one change on record.
type settingsVersion struct {
	Title, By, Reason string
	Changes           []string
}

// SettingsAddress is where the settings of a plant are seen and changed.
const SettingsAddress = "/desk/settings"

// settingText is a setting as people read it, with its unit.
func settingText(f ui.Format, st plant.SettingField, s plant.Settings) string {
	text := st.Text(s)
	if st.Switch() {
		return f.Words.T("setting.switch." + text)
	}
	if st.Unit == "" {
		return f.Words.Number(text)
	}
	return f.WithUnit(f.Words.Number(text), f.Words.T("setting.unit."+st.Unit))
}

func settingName(f ui.Format, st plant.SettingField) string {
	return f.Words.T("setting.name." + st.Key)
}

// settingsForm is what was typed: the texts as they were, and what they mean.
type settingsForm struct {
	texts    map[string]string // by key
	change   plant.SettingsChange
	problems map[string]string
	conflict string
}

func formOf(s plant.Settings) settingsForm {
	return settingsForm{texts: s.Content(), problems: map[string]string{},
		change: plant.SettingsChange{ID: uuid.Must(uuid.NewV7()), Replaces: s.Version, Settings: s}}
}

func (d *Desk) showSettings(w http.ResponseWriter, r *http.Request) error {
	now, err := d.store.Settings(r.Context())
	if err != nil {
		return err
	}
	return d.renderSettings(w, r, http.StatusOK, formOf(now))
}

func (d *Desk) changeSettings(w http.ResponseWriter, r *http.Request) error {
	if err := ui.ParseForm(w, r); err != nil {
		return err
	}
	frame := ui.FrameOf(r)
	form := readSettings(frame.Words, r.PostForm)
	form.change.Person = frame.Person.ID
	if len(form.problems) == 0 {
		_, err := d.store.ChangeSettings(r.Context(), form.change)
		if err == nil {
			ui.Redirect(w, r, withQuery(SettingsAddress, url.Values{"saved": {"1"}}))
			return nil
		}
		pe, ok := errors.AsType[*plant.Error](err)
		switch {
		case ok && pe.Kind == plant.Invalid && pe.Field != "id":
			form.problems[pe.Field] = frame.Words.Problem(pe)
		case ok && (pe.Kind == plant.Invalid || pe.Kind == plant.Conflict):
			// What is on record now is shown; it replaces that when it is sent again.
			now, err := d.store.Settings(r.Context())
			if err != nil {
				return err
			}
			reason := form.change.Reason
			form = formOf(now)
			form.change.Reason, form.conflict = reason, frame.Words.Problem(pe)
			return d.renderSettings(w, r, ui.StatusOf(pe.Kind), form)
		default:
			return err
		}
	}
	return d.renderSettings(w, r, http.StatusUnprocessableEntity, form)
}

// readSettings reads the form; a setting that it does not hold is refused, so that a
// damaged form changes nothing.
func readSettings(w *words.Printer, q url.Values) settingsForm {
	form := formOf(plant.DefaultSettings())
	for _, st := range plant.AllSettings() {
		form.texts[st.Key] = q.Get(st.Key)
		if err := st.Set(&form.change.Settings, q.Get(st.Key)); err != nil {
			if pe, ok := errors.AsType[*plant.Error](err); ok {
				form.problems[st.Key] = w.Problem(pe)
			}
		}
	}
	form.change.Reason = q.Get("reason")
	var err error
	if form.change.ID, err = uuid.Parse(q.Get("id")); err != nil {
		form.change.ID = uuid.Nil
	}
	if form.change.Replaces, err = strconv.Atoi(q.Get("replaces")); err != nil {
		form.change.Replaces = -1
	}
	return form
}

func (d *Desk) renderSettings(w http.ResponseWriter, r *http.Request, status int, form settingsForm) error {
	versions, err := d.store.SettingsVersions(r.Context())
	if err != nil {
		return err
	}
	s := ui.ShellFor(r, ui.Desk, ui.FrameOf(r).Words.T("setting.title"))
	s.Bar = bar(s.Words, uuid.Nil, false, "settings")
	s.Styles = []string{"css/settings.css"}
	v := newSettings(s.Format, form, versions)
	v.May = s.Person.May(plant.SetLimits)
	if r.URL.Query().Get("saved") != "" && len(versions) > 0 {
		v.Saved = s.Words.T("setting.saved", versions[0].Version)
	}
	return ui.Render(w, r, status, settingsPage(s, v))
}

func newSettings(f ui.Format, form settingsForm, versions []plant.Settings) settingsView {
	w := f.Words
	v := settingsView{ID: form.change.ID.String(), Replaces: form.change.Replaces, Reason: form.change.Reason, Problems: form.problems, Conflict: form.conflict}
	defaults := plant.DefaultSettings()
	for _, st := range plant.AllSettings() {
		if n := len(v.Groups); n == 0 || v.Groups[n-1].ID != st.Group() {
			v.Groups = append(v.Groups, settingGroup{ID: st.Group(), Name: w.T("setting.group." + st.Group()), Meaning: w.T("setting.group-meaning." + st.Group())})
		}
		row := settingRow{Key: st.Key, Name: settingName(f, st), Meaning: w.T("setting.meaning." + st.Key), Value: form.texts[st.Key], Switch: st.Switch(),
			Changed: form.texts[st.Key] != st.Text(defaults), Problem: form.problems[st.Key]}
		if st.Unit != "" {
			row.Unit = w.T("setting.unit." + st.Unit)
		}
		row.Default = w.T("setting.default", settingText(f, st, defaults))
		g := &v.Groups[len(v.Groups)-1]
		g.Rows = append(g.Rows, row)
	}
	for i, s := range versions {
		before := defaults
		if i+1 < len(versions) {
			before = versions[i+1]
		}
		v.Versions = append(v.Versions, newSettingsVersion(f, s, before))
	}
	return v
}

func newSettingsVersion(f ui.Format, s, before plant.Settings) settingsVersion {
	v := settingsVersion{Title: f.Words.T("setting.version", s.Version), By: f.Words.T("setting.changed-by", s.PersonName, f.Clock(s.MadeAt)), Reason: s.Reason}
	for _, st := range plant.AllSettings() {
		if was, is := settingText(f, st, before), settingText(f, st, s); was != is {
			v.Changes = append(v.Changes, f.Words.T("setting.from-to", settingName(f, st), was, is))
		}
	}
	if len(v.Changes) == 0 {
		v.Changes = []string{f.Words.T("setting.nothing-changed")}
	}
	return v
}
