package plant

import (
	"math"
	"slices"
	"strconv"
	"strings"
	"time"

	"github.com/google/uuid"
)

// Settings are the numbers of a plant that an engineer may change. Each change makes a
// version, sealed in the plant's chain; version 0 is the defaults of the program.
//
// To add a setting: give a group of Settings a field, set its default in
// DefaultSettings, and list it in the group's table (OwnerSettingsTable shows how), which
// AllSettings joins. Its words are setting.name.KEY and setting.meaning.KEY in the
// catalogue. The page, the record and its comparison with the ledger follow by
// themselves. A setting that is not on record yet has its default.
type Settings struct {
	Version    int
	MadeAt     time.Time
	Person     uuid.UUID
	PersonName string // for showing, read beside the version
	Reason     string

	Owner      OwnerSettings
	Escalation EscalationSettings
}

// DefaultSettings are the settings of a plant that never changed any.
func DefaultSettings() Settings {
	return Settings{Owner: defaultOwnerSettings, Escalation: defaultEscalationSettings}
}

// allSettings is every setting in the order in which they are shown; those of one group
// stand together.
var allSettings = slices.Concat(OwnerSettingsTable, EscalationSettingsTable)

// AllSettings lists every setting in the order in which they are shown, group by group.
func AllSettings() []SettingField { return slices.Clone(allSettings) }

// SettingField describes one of the settings: what may be typed and where it is kept.
type SettingField struct {
	Key      string // its group, a point and its name: "owner.stable-subgroups"
	Unit     string // last part of the key of its unit's word, "" without one
	Decimals int    // of a number with a fraction
	Least    float64
	Most     float64

	// Field points at the setting: an *int, a *float64, a *bool or, in whole minutes, a
	// *time.Duration.
	Field func(*Settings) any
}

// Group is the first part of the key.
func (st SettingField) Group() string {
	group, _, _ := strings.Cut(st.Key, ".")
	return group
}

// Switch reports whether the setting is a yes or no: its texts are "yes" and "no".
func (st SettingField) Switch() bool {
	_, ok := st.Field(&Settings{}).(*bool)
	return ok
}

// Text is the setting as it is kept and typed, with a point.
func (st SettingField) Text(s Settings) string {
	switch v := st.Field(&s).(type) {
	case *int:
		return strconv.Itoa(*v)
	case *float64:
		return FormatFloat(*v, st.Decimals)
	case *time.Duration:
		return strconv.Itoa(int(*v / time.Minute))
	case *bool:
		if *v {
			return "yes"
		}
		return "no"
	}
	panic("plant: setting " + st.Key + " is of no kind that can be kept")
}

// Set reads what was typed. What it refuses names the setting as its field.
func (st SettingField) Set(s *Settings, text string) error {
	text = strings.TrimSpace(text)
	if b, ok := st.Field(s).(*bool); ok {
		if text != "yes" && text != "no" {
			return Invalidf(st.Key, "Choose yes or no.")
		}
		*b = text == "yes"
		return nil
	}
	d, err := ParseDecimal(text)
	if err != nil {
		return Invalidf(st.Key, "This is not a number. Type it again.")
	}
	v := d.Float()
	if v < st.Least || v > st.Most {
		return Invalidf(st.Key, "Type a number from %s to %s.", FormatFloat(st.Least, st.Decimals), FormatFloat(st.Most, st.Decimals))
	}
	if _, err := d.In(st.Decimals); err != nil {
		if st.Decimals == 0 {
			return Invalidf(st.Key, "Type a whole number.")
		}
		return Invalidf(st.Key, "Type it with at most %d decimals.", st.Decimals)
	}
	switch f := st.Field(s).(type) {
	case *int:
		*f = int(math.Round(v))
	case *float64:
		*f = v
	case *time.Duration:
		*f = time.Duration(math.Round(v)) * time.Minute
	}
	return nil
}

// Content is every setting as it is kept, by key.
func (s Settings) Content() map[string]string {
	out := make(map[string]string, len(allSettings))
	for _, st := range allSettings {
		out[st.Key] = st.Text(s)
	}
	return out
}

// SettingsFrom reads what Content wrote. What is not there has its default; what this
// version of the program does not know, or would refuse, is passed over.
func SettingsFrom(content map[string]string) Settings {
	s := DefaultSettings()
	for _, st := range allSettings {
		if text, ok := content[st.Key]; ok {
			_ = st.Set(&s, text) // refused: the default stays
		}
	}
	return s
}

// Check says which settings contradict one another.
func (s Settings) Check() error {
	if err := s.Owner.check(); err != nil {
		return err
	}
	return s.Escalation.check()
}

// SettingsChange is what an engineer asks for: all settings as they shall be.
type SettingsChange struct {
	ID       uuid.UUID // from the sender, so that sending it again is recognised
	Replaces int       // version that was seen
	Settings Settings
	Reason   string
	Person   uuid.UUID
}

// MaxSettingsReason is how long the reason of a change may be, in characters.
const MaxSettingsReason = 400

// Clean checks the change and cleans its text.
func (c *SettingsChange) Clean() error {
	if c.ID == uuid.Nil {
		return Invalidf("id", "This form is damaged. Load the page again.")
	}
	var err error
	if c.Reason, err = CleanTextWithin("reason", c.Reason, MaxSettingsReason); err != nil {
		return err
	}
	if c.Reason == "" {
		return Invalidf("reason", "Say why it is changed.")
	}
	return c.Settings.Check()
}
