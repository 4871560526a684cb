package auth

import (
	"bytes"
	"encoding/gob"
	"encoding/json"
	"fmt"
	"log/slog"
	"strings"
	"testing"

	"holdfast/internal/plant"
)

func TestSecretHidesItself(t *testing.T) {
	t.Parallel()
	const text = "correct horse"
	s := Secret(text)
	type form struct {
		Login  string
		Secret Secret
		Other  *Secret
		Many   map[string][]Secret
	}
	f := form{"anna", s, &s, map[string][]Secret{"a": {s}}}
	var out bytes.Buffer
	for _, verb := range []string{"%s", "%v", "%+v", "%#v", "%q", "%x", "%X", "%d", "%t", "%10s"} {
		fmt.Fprintf(&out, verb+"\n", s)
		fmt.Fprintf(&out, verb+"\n", f.Many)
	}
	fmt.Fprintln(&out, s, f.Secret, []any{s}, fmt.Errorf("bad secret %v: %w", s, fmt.Errorf("%s", s)))
	fmt.Fprintf(&out, "%+v %#v\n", f, f)
	for _, h := range []slog.Handler{slog.NewTextHandler(&out, nil), slog.NewJSONHandler(&out, nil)} {
		slog.New(h).Info("sign-in", "secret", s, "form", f, slog.Any("pointer", &s), slog.Group("g", "s", s))
	}
	b, err := json.Marshal(f)
	if err != nil {
		t.Fatal(err)
	}
	out.Write(b)
	if err := gob.NewEncoder(&out).Encode(s); err == nil {
		t.Error("a secret could be stored by gob")
	}
	got := out.String()
	if strings.Contains(got, text) || strings.Contains(strings.ToLower(got), fmt.Sprintf("%x", text)) {
		t.Errorf("the secret shows:\n%s", got)
	}
	var back form
	if err := json.Unmarshal([]byte(`{"Login":"anna","Secret":"correct horse"}`), &back); err != nil || string(back.Secret) != text {
		t.Errorf("a secret sent as JSON was read as %q, %v", string(back.Secret), err)
	}
}

func TestRulesFollowTheGuideline(t *testing.T) {
	t.Parallel()
	for _, tc := range []struct {
		name   string
		rules  Rules
		secret string
		ok     bool
	}{
		{"15 characters", Rules{}, "kettle on table", true},
		{"14 characters", Rules{}, "kettle on tabl", false},
		{"no kinds of characters asked for", Rules{}, "seven lazy herons", true},
		{"8 where asked for", Rules{MinLength: 8}, "kettle o", true},
		{"never below 8", Rules{MinLength: 4}, "kettle", false},
		{"code points count, not bytes", Rules{MinLength: 8}, "žluťoučk", true},
		{"7 code points, 14 bytes", Rules{MinLength: 8}, "žščřžšř", false},
		{"64 are allowed", Rules{}, longText(64), true},
		{"128 are allowed", Rules{}, longText(128), true},
		{"129 are refused, not cut", Rules{}, longText(129), false},
		{"very long", Rules{}, strings.Repeat("x", 1<<20), false},
		{"not text", Rules{}, "kettle on table \xff\xfe", false},
		{"one character", Rules{}, "aaaaaaaaaaaaaaaa", false},
		{"a short piece repeated", Rules{}, "ab12ab12ab12ab12", false},
		{"digits up", Rules{}, "123456789012345", false},
		{"alphabet down", Rules{}, "zyxwvutsrqponmlk", false},
		{"keyboard row", Rules{MinLength: 8}, "qwertyuiop", false},
		{"rows joined", Rules{}, "qwertyuiopasdfghjkl", false},
		{"the service's name", Rules{}, "Holdfast Holdfast", false},
		{"login and name", Rules{}, "anna Anna Smith 1", false},
		{"the word itself", Rules{}, "passwordpassword1", false},
		{"a name inside a longer text", Rules{}, "anna keeps seven herons", true},
	} {
		err := tc.rules.Check(Secret(tc.secret), "anna", "Anna Smith")
		if (err == nil) != tc.ok {
			t.Errorf("%s: Check = %v; want ok %v", tc.name, err, tc.ok)
		}
		if err != nil {
			pe, ok := err.(*plant.Error)
			if !ok || pe.Kind != plant.Invalid || pe.Field != "password" {
				t.Errorf("%s: error = %#v; want Invalid at the password", tc.name, err)
			} else if len(tc.secret) > 3 && strings.Contains(pe.Error(), tc.secret) {
				t.Errorf("%s: the message repeats the secret", tc.name)
			}
		}
	}
}

// longText is n characters that neither repeat nor run along a row.
func longText(n int) string {
	var b strings.Builder
	for i := 0; b.Len() < n; i++ {
		fmt.Fprintf(&b, "heron%dkettle", i*i)
	}
	return b.String()[:n]
}

func TestRandomSecretsAreFitAndDiffer(t *testing.T) {
	t.Parallel()
	seen := make(map[string]bool)
	for range 2000 {
		s := RandomSecret()
		if err := (Rules{}).Check(s); err != nil {
			t.Errorf("%s: %v", string(s), err)
		}
		if len(s) != 19 || strings.Trim(string(s), "abcdefghijklmnopqrstuvwxyz-") != "" {
			t.Errorf("%q is not four groups of small letters", string(s))
		}
		if seen[string(s)] {
			t.Errorf("%q came twice in 2000 of 2^49", string(s))
		}
		seen[string(s)] = true
	}
}
