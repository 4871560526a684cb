package compose

import (
	"maps"
	"net/url"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"testing"

	"github.com/compose-spec/compose-go/v2/cli"
	"github.com/compose-spec/compose-go/v2/types"
)

const root = "../../.."

// secrets are the variables that must be given: the file has no defaults.
var secrets = map[string]string{
	"POSTGRES_PASSWORD":       "secret-of-postgres",
	"HOLDFAST_OWNER_PASSWORD": "secret-of-owner",
	"HOLDFAST_APP_PASSWORD":   "secret-of-app",
}

func load(t *testing.T, env map[string]string) (*types.Project, error) {
	t.Helper()
	var pairs []string
	for name, value := range env {
		pairs = append(pairs, name+"="+value)
	}
	options, err := cli.NewProjectOptions([]string{filepath.Join(root, "docker-compose.yml")},
		cli.WithEnv(pairs))
	if err != nil {
		t.Fatal(err)
	}
	return options.LoadProject(t.Context())
}

func TestNothingStartsWithoutPasswords(t *testing.T) {
	t.Parallel()
	for missing := range secrets {
		for _, kind := range []string{"unset", "empty"} {
			env := maps.Clone(secrets)
			delete(env, missing)
			if kind == "empty" {
				env[missing] = ""
			}
			_, err := load(t, env)
			if err == nil || !strings.Contains(err.Error(), missing) {
				t.Errorf("%s %s: error %v; want it named", missing, kind, err)
			}
		}
	}
}

func TestServices(t *testing.T) {
	t.Parallel()
	p, err := load(t, secrets)
	if err != nil {
		t.Fatal(err)
	}
	if got := slices.Sorted(maps.Keys(p.Services)); !slices.Equal(got, []string{"postgres", "server"}) {
		t.Errorf("services %q start by default", got)
	}
	postgres, server := p.Services["postgres"], p.Services["server"]
	if !strings.HasPrefix(postgres.Image, "postgres:15") {
		t.Errorf("database image is %s", postgres.Image)
	}
	for name, s := range map[string]types.ServiceConfig{"postgres": postgres, "server": server} {
		if s.HealthCheck == nil || s.HealthCheck.Disable || len(s.HealthCheck.Test) < 2 || s.HealthCheck.Test[0] != "CMD" {
			t.Errorf("%s has no health check without a shell", name)
		}
		if s.Restart != "unless-stopped" || s.Privileged {
			t.Errorf("%s: restart %q, privileged %v", name, s.Restart, s.Privileged)
		}
	}
	if d, ok := server.DependsOn["postgres"]; !ok || d.Condition != types.ServiceConditionHealthy || !d.Required {
		t.Error("the server does not wait for a healthy database")
	}
	if len(postgres.Ports) > 0 {
		t.Error("the database can be reached from outside")
	}
	if n := p.Networks["database"]; !bool(n.Internal) || len(postgres.Networks) != 1 {
		t.Error("the database is not on a network of its own")
	}
	for _, port := range server.Ports {
		if port.Target != 8443 {
			t.Errorf("the server is published as %+v; want its encrypted port", port)
		}
	}
	for name, want := range map[string]string{"HOLDFAST_TLS": "auto", "HOLDFAST_TLS_DIR": "/state/tls", "HOLDFAST_HEALTH_URL": "https://localhost:8443"} {
		if v := server.Environment[name]; v == nil || *v != want {
			t.Errorf("%s is %v; want %s", name, v, want)
		}
	}
	if !server.ReadOnly || !slices.Contains(server.CapDrop, "ALL") {
		t.Error("the server keeps rights that it does not need")
	}
}

func TestServerUsesTwoRoles(t *testing.T) {
	t.Parallel()
	p, err := load(t, secrets)
	if err != nil {
		t.Fatal(err)
	}
	for variable, want := range map[string]struct{ role, password string }{
		"DATABASE_OWNER_URL": {"holdfast", "secret-of-owner"},
		"DATABASE_URL":       {"holdfast_app", "secret-of-app"},
	} {
		value := p.Services["server"].Environment[variable]
		if value == nil {
			t.Errorf("%s is not set", variable)
			continue
		}
		u, err := url.Parse(*value)
		if err != nil {
			t.Errorf("%s: %v", variable, err)
			continue
		}
		password, _ := u.User.Password()
		if u.Scheme != "postgres" || u.Host != "postgres:5432" || u.Path != "/holdfast" ||
			u.User.Username() != want.role || password != want.password {
			t.Errorf("%s is %s", variable, *value)
		}
	}
	if v := p.Services["server"].Environment["POSTGRES_PASSWORD"]; v != nil {
		t.Error("the server knows the superuser's password")
	}
}

func TestFilesAndVolumesExist(t *testing.T) {
	t.Parallel()
	p, err := load(t, secrets)
	if err != nil {
		t.Fatal(err)
	}
	data, state := false, false
	for _, s := range p.Services {
		for _, v := range s.Volumes {
			switch v.Type {
			case types.VolumeTypeBind:
				if info, err := os.Stat(v.Source); err != nil || info.IsDir() || !v.ReadOnly {
					t.Errorf("%s mounts %s: %v; want a file, read-only", s.Name, v.Source, err)
				}
			case types.VolumeTypeVolume:
				if _, ok := p.Volumes[v.Source]; !ok {
					t.Errorf("%s uses volume %s, which is not declared", s.Name, v.Source)
				}
				state = state || s.Name == "server" && v.Target == "/state"
				data = data || s.Name == "postgres" && v.Target == "/var/lib/postgresql/data"
			}
		}
	}
	if !data || !state {
		t.Error("the data or the authority are not on a volume")
	}
	build := p.Services["server"].Build
	if build == nil {
		t.Fatal("the server is not built from this source")
	}
	if _, err := os.Stat(filepath.Join(build.Context, "go.mod")); err != nil {
		t.Errorf("the build's folder is not the source: %v", err)
	}
	if _, err := os.Stat(filepath.Join(build.Context, build.Dockerfile)); err != nil {
		t.Error(err)
	}
}

// TestImage reads the few lines of the Dockerfile that must hold.
func TestImage(t *testing.T) {
	t.Parallel()
	text, err := os.ReadFile(filepath.Join(root, "deploy", "Dockerfile"))
	if err != nil {
		t.Fatal(err)
	}
	stages := strings.Split(string(text), "\nFROM ")
	if len(stages) != 3 {
		t.Fatalf("%d stages; want a build and a bare one", len(stages)-1)
	}
	build, image := stages[1], stages[2]
	for name, want := range map[string]struct{ in, pattern string }{
		"static program":       {build, `(?m)^RUN CGO_ENABLED=0 go build .*\./cmd/holdfast$`},
		"nothing else inside":  {image, `^scratch\n`},
		"unprivileged":         {image, `(?m)^USER [1-9][0-9]*:[1-9][0-9]*$`},
		"serves":               {image, `(?m)^CMD \["serve", "--addr", "0\.0\.0\.0:8443"\]$`},
		"asks for its health":  {image, `(?m)^HEALTHCHECK .*CMD \["/holdfast", "health"\]$`},
		"the program itself":   {image, `(?m)^ENTRYPOINT \["/holdfast"\]$`},
		"a folder of its own":  {image, `(?m)^COPY --from=build --chown=65532:65532 /out/state /state$`},
		"encrypted by default": {image, `(?m)^ENV HOLDFAST_TLS=auto `},
		"authorities for TLS":  {image, `/etc/ssl/certs/ca-certificates\.crt\n`},
		"time zones of plants": {image, `(?m)^ENV ZONEINFO=/zoneinfo\.zip$`},
	} {
		if !regexp.MustCompile(want.pattern).MatchString(want.in) {
			t.Errorf("%s: nothing matches %s", name, want.pattern)
		}
	}

	mod, err := os.ReadFile(filepath.Join(root, "go.mod"))
	if err != nil {
		t.Fatal(err)
	}
	wanted := regexp.MustCompile(`(?m)^go (\d+\.\d+)`).FindSubmatch(mod)
	given := regexp.MustCompile(`^golang:(\d+\.\d+)-`).FindStringSubmatch(build)
	if wanted == nil || given == nil || string(wanted[1]) != given[1] {
		t.Errorf("the image builds with Go %q, go.mod asks for %q", given, wanted)
	}
}
