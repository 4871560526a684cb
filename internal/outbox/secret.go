package outbox

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"log/slog"
	"os"
	"path/filepath"
	"regexp"
	"strings"
)

// Secret is a password or a key. Whatever prints, logs or encodes it gets a placeholder;
// string(s) is the one way to its text.
type Secret string

const hidden = "[secret]"

func (Secret) String() string               { return hidden }
func (Secret) LogValue() slog.Value         { return slog.StringValue(hidden) }
func (Secret) MarshalText() ([]byte, error) { return []byte(hidden), nil }

// Format hides the secret from every verb.
func (Secret) Format(f fmt.State, _ rune) { _, _ = io.WriteString(f, hidden) }

// Secrets is where secrets are looked up by name.
type Secrets struct {
	Dir         string // a file each; "" for none
	Credentials string // the folder that a service manager hands over; "" for none
	Getenv      func(name string) string
}

// SystemSecrets looks in the folder, then in what the service manager hands over, then
// in the environment.
func SystemSecrets(dir string) Secrets {
	return Secrets{Dir: dir, Credentials: os.Getenv("CREDENTIALS_DIRECTORY"), Getenv: os.Getenv}
}

var secretName = regexp.MustCompile(`^[a-z0-9][a-z0-9-]{0,62}$`)

// maxSecret bounds what is read of a secret's file.
const maxSecret = 4096

// Get reads a secret. The end of its last line is not part of it.
func (s Secrets) Get(name string) (Secret, error) {
	if !secretName.MatchString(name) {
		return "", fmt.Errorf("a secret is named by small letters, digits and hyphens, not %q", name)
	}
	for _, dir := range []string{s.Dir, s.Credentials} {
		if dir == "" {
			continue
		}
		text, err := readSecret(filepath.Join(dir, name))
		if errors.Is(err, fs.ErrNotExist) {
			continue
		}
		if err != nil {
			return "", fmt.Errorf("read the secret %s: %w", name, err)
		}
		return text, nil
	}
	if s.Getenv != nil {
		if v := s.Getenv(EnvironmentOf(name)); v != "" {
			return Secret(v), nil
		}
	}
	return "", fmt.Errorf("there is no secret %s: put it into a file of that name, hand it over as a credential of the service, or set %s", name, EnvironmentOf(name))
}

// EnvironmentOf is the name of the environment variable that may hold a secret.
func EnvironmentOf(name string) string {
	return "HOLDFAST_SECRET_" + strings.ToUpper(strings.ReplaceAll(name, "-", "_"))
}

func readSecret(path string) (Secret, error) {
	f, err := os.Open(path)
	if err != nil {
		return "", err
	}
	defer f.Close()
	info, err := f.Stat()
	if err != nil {
		return "", err
	}
	if !info.Mode().IsRegular() {
		return "", errors.New("it is not a file")
	}
	if info.Mode().Perm()&0o004 != 0 {
		return "", errors.New("everybody on this machine may read its file; chmod o-r it")
	}
	b, err := io.ReadAll(io.LimitReader(f, maxSecret+1))
	if err != nil {
		return "", err
	}
	text := strings.TrimRight(string(b), "\r\n")
	switch {
	case len(b) > maxSecret:
		return "", fmt.Errorf("it is longer than %d bytes", maxSecret)
	case text == "":
		return "", errors.New("its file is empty")
	}
	return Secret(text), nil
}
