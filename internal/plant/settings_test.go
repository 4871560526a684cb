package plant

import (
	"strings"
	"testing"
	"time"

	"github.com/google/uuid"
)

func TestEverySettingReadsWhatItWrites(t *testing.T) {
	t.Parallel()
	defaults := DefaultSettings()
	if err := defaults.Check(); err != nil {
		t.Fatalf("the defaults contradict one another: %v", err)
	}
	seen := map[string]bool{}
	group := ""
	for _, st := range AllSettings() {
		if seen[st.Key] || !strings.Contains(st.Key, ".") {
			t.Errorf("%s stands twice or has no group", st.Key)
		}
		seen[st.Key] = true
		if st.Group() != group && seen["group "+st.Group()] {
			t.Errorf("%s is apart from its group", st.Key)
		}
		group = st.Group()
		seen["group "+group] = true
		s := Settings{}
		if err := st.Set(&s, st.Text(defaults)); err != nil || st.Text(s) != st.Text(defaults) {
			t.Errorf("%s: the default %q reads back as %q, %v", st.Key, st.Text(defaults), st.Text(s), err)
		}
		for _, bad := range []string{"", "x", "-1e9", "1e9", "99999999999"} {
			if err := st.Set(&s, bad); !IsKind(err, Invalid) {
				t.Errorf("%s takes %q: %v", st.Key, bad, err)
			}
		}
	}
	if got := SettingsFrom(defaults.Content()); got != defaults {
		t.Errorf("the content reads back as %+v, want %+v", got, defaults)
	}
	if got := SettingsFrom(map[string]string{"of.the-future": "3", "owner.capable": "nonsense"}); got != defaults {
		t.Errorf("unknown content gives %+v, want the defaults", got)
	}
}

func TestEveryKindOfSettingCanBeTyped(t *testing.T) {
	t.Parallel()
	var number float64
	var whole int
	var choice bool
	var minutes time.Duration
	row := func(decimals int, f any) SettingField {
		return SettingField{Key: "a.b", Decimals: decimals, Least: 0, Most: 100, Field: func(*Settings) any { return f }}
	}
	for _, tc := range []struct {
		st        SettingField
		typed, is string // "" refused
	}{
		{row(2, &number), " 1,5 ", "1.50"}, {row(2, &number), "1.505", ""}, {row(2, &number), "100.01", ""},
		{row(0, &whole), "25", "25"}, {row(0, &whole), "2.5", ""}, {row(0, &whole), "7.0", "7"},
		{row(0, &choice), "yes", "yes"}, {row(0, &choice), "maybe", ""},
		{row(0, &minutes), "90", "90"}, {row(0, &minutes), "-1", ""},
	} {
		err := tc.st.Set(&Settings{}, tc.typed)
		if tc.is == "" {
			if !IsKind(err, Invalid) {
				t.Errorf("%q is taken: %v", tc.typed, err)
			}
		} else if got := tc.st.Text(Settings{}); err != nil || got != tc.is {
			t.Errorf("%q reads as %q, %v; want %q", tc.typed, got, err, tc.is)
		}
	}
	if minutes != 90*time.Minute {
		t.Errorf("90 minutes are %v", minutes)
	}
}

func TestSettingsThatContradictAreRefused(t *testing.T) {
	t.Parallel()
	change := func(f func(*SettingsChange)) error {
		c := SettingsChange{ID: uuid.New(), Settings: DefaultSettings(), Reason: " the customer asks  for it "}
		f(&c)
		return c.Clean()
	}
	for name, f := range map[string]func(*SettingsChange){
		"no id":                    func(c *SettingsChange) { c.ID = uuid.Nil },
		"no reason":                func(c *SettingsChange) { c.Reason = " \t" },
		"a long reason":            func(c *SettingsChange) { c.Reason = strings.Repeat("x", MaxSettingsReason+1) },
		"accepted above capable":   func(c *SettingsChange) { c.Settings.Owner.Accepted = 1.5 },
		"a window below the claim": func(c *SettingsChange) { c.Settings.Owner.Window = 25; c.Settings.Owner.LeastSubgroups = 30 },
	} {
		if err := change(f); !IsKind(err, Invalid) {
			t.Errorf("%s: %v, want it refused", name, err)
		}
	}
	if err := change(func(*SettingsChange) {}); err != nil {
		t.Error(err)
	}
}
