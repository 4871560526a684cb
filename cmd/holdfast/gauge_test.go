package main

import (
	"context"
	"fmt"
	"log/slog"
	"net"
	"os"
	"path/filepath"
	"strings"
	"testing"
	"time"

	broker "github.com/mochi-mqtt/server/v2"
	allow "github.com/mochi-mqtt/server/v2/hooks/auth"
	"github.com/mochi-mqtt/server/v2/listeners"
	"golang.org/x/sync/errgroup"
	"golang.org/x/sys/unix"

	"holdfast/internal/plant"
	"holdfast/internal/relay"
)

// pseudoTerminal is a serial port with the gauge's end of the cable.
func pseudoTerminal(t *testing.T) (gauge *os.File, port string) {
	t.Helper()
	gauge, err := os.OpenFile("/dev/ptmx", os.O_RDWR|unix.O_NOCTTY, 0)
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = gauge.Close() })
	fd := int(gauge.Fd())
	if err := unix.IoctlSetPointerInt(fd, unix.TIOCSPTLCK, 0); err != nil {
		t.Fatal(err)
	}
	n, err := unix.IoctlGetInt(fd, unix.TIOCGPTN)
	if err != nil {
		t.Fatal(err)
	}
	return gauge, fmt.Sprintf("/dev/pts/%d", n)
}

func TestAGaugeOnASerialPort(t *testing.T) {
	t.Parallel()
	r := serve(t)
	ctx := context.Background()
	_, token := r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	gauge, port := pseudoTerminal(t)
	folder := t.TempDir()
	c := gaugeCmd{Port: port, Baud: 9600, Characteristic: r.Diameter.Name, Unit: "mm", Size: 5, Suffix: "<", Within: time.Hour}
	c.Server, c.TokenFile, c.Spool = r.url, filepath.Join(folder, "token"), filepath.Join(folder, "spool")
	if err := os.WriteFile(c.TokenFile, []byte(token+"\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	running, stop := context.WithCancel(ctx)
	var g errgroup.Group
	g.Go(func() error { return c.Run(running, slog.New(slog.DiscardHandler)) })
	defer func() {
		stop()
		if err := g.Wait(); err != nil {
			t.Error(err)
		}
	}()
	// Until the port is open, the terminal would eat what is written.
	for end := time.Now().Add(20 * time.Second); ; time.Sleep(20 * time.Millisecond) {
		if raw, err := unix.IoctlGetTermios(int(gauge.Fd()), unix.TCGETS); err == nil && raw.Lflag&unix.ICANON == 0 {
			break
		} else if time.Now().After(end) {
			t.Fatalf("the port was not opened: %v", err)
		}
	}
	for _, line := range []string{"14.991 mm<", "14,990<", "0.5902 in<", "14.9915<", "14.990<", "14.990<", "14.992 mm<", "14.9"} { // the last breaks off
		if _, err := gauge.WriteString(line + map[bool]string{true: "", false: "\r\n"}[line == "14.9"]); err != nil {
			t.Fatal(err)
		}
	}
	var readings []int64
	for end := time.Now().Add(20 * time.Second); len(readings) == 0; time.Sleep(20 * time.Millisecond) {
		_ = r.Pool().QueryRow(ctx, `select readings from subgroup where characteristic_id = $1`, r.Diameter.ID).Scan(&readings)
		if time.Now().After(end) {
			t.Fatal("no subgroup came")
		}
	}
	if fmt.Sprint(readings) != "[14991 14990 14990 14990 14992]" {
		t.Errorf("on record: %v", readings)
	}
	if _, body := r.visit(t, "operator1").get("/station/" + r.Station.ID.String()); !strings.Contains(body, "A reading came in another unit") || !strings.Contains(body, "0.5902 in") {
		t.Error("the station does not show the line in another unit")
	} else if !strings.Contains(body, "A reading came with more decimals than are measured") || !strings.Contains(body, "14.9915") {
		t.Error("the station does not show the line with more decimals than are measured")
	}
}

// TestAGaugeOnStandardInput says at its start what would be refused, and at its end what waits
// and what was refused.
func TestAGaugeOnStandardInput(t *testing.T) {
	r := serve(t)
	_, token := r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Bore gauge", Station: r.Station.ID})
	folder := t.TempDir()
	var told strings.Builder
	send := func(change func(c *gaugeCmd), lines string) error {
		t.Helper()
		c := gaugeCmd{Port: "-", Characteristic: r.Diameter.Name, Unit: "mm", Size: 5, Within: time.Hour}
		c.Server, c.TokenFile, c.Spool = r.url, filepath.Join(folder, "token"), filepath.Join(folder, "spool")
		change(&c)
		in := filepath.Join(folder, "in")
		for path, text := range map[string]string{c.TokenFile: token, in: lines} {
			if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
				t.Fatal(err)
			}
		}
		f, err := os.Open(in)
		if err != nil {
			t.Fatal(err)
		}
		before := os.Stdin
		defer func() { os.Stdin = before }()
		os.Stdin = f
		told.Reset()
		return c.Run(t.Context(), slog.New(slog.NewTextHandler(&told, nil)))
	}
	const five = "14.991\n14.990\n14.990\n14.990\n14.992\n"
	for want, change := range map[string]func(c *gaugeCmd){
		"is measured in mm, and --unit says in":                                   func(c *gaugeCmd) { c.Unit = "in" },
		"5 readings of Axle seat diameter are asked each time, and --size says 3": func(c *gaugeCmd) { c.Size = 3 },
		`the station measures no "Bore", only `:                                   func(c *gaugeCmd) { c.Characteristic = "Bore" },
	} {
		if err := send(change, five); err == nil || !strings.Contains(err.Error(), want) || !strings.HasPrefix(err.Error(), "nothing was read: ") {
			t.Errorf("%v, want %q", err, want)
		}
	}
	if err := send(func(*gaugeCmd) {}, "garbage\n14.9912345\n"+five+"14.991\n"); err != nil {
		t.Error(err)
	}
	for _, want := range []string{`"not a reading; the station is told" line=garbage why=number`, `line=14.9912345 why=decimals`, `msg=taken`, `verdict=learning`, "readings=1 of=5"} {
		if !strings.Contains(told.String(), want) {
			t.Errorf("not told %q:\n%s", want, told.String())
		}
	}
	err := send(func(c *gaugeCmd) { c.Streams, c.Spool = []string{"spindle 9"}, filepath.Join(folder, "other") }, five)
	if err == nil || !strings.Contains(err.Error(), "subgroups refused: 1; they are put aside in ") {
		t.Errorf("a refused subgroup: %v\n%s", err, told.String())
	}
}

func TestTheFileOfTheBroker(t *testing.T) {
	t.Parallel()
	folder := t.TempDir()
	log := slog.New(slog.DiscardHandler)
	s, err := relay.OpenSpool(filepath.Join(folder, "spool"), log)
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	password := filepath.Join(folder, "password")
	if err := os.WriteFile(password, []byte("open sesame\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	read := func(text string) (*relay.Broker, error) {
		path := filepath.Join(folder, "broker.toml")
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
		return readBroker(path, s, log, func(string, string) func(string) error { return nil })
	}
	const head = "broker = \"ssl://broker.plant:8883\"\nclient = \"holdfast-axles\"\n"
	b, err := read(head + "user = \"holdfast\"\npassword_file = \"" + password + "\"\nrounds = \"axles/rounds\"\n" +
		"[[readings]]\ntopic = \"axles/diameter\"\ncharacteristic = \"Axle seat diameter\"\nunit = \"mm\"\nsize = 5\n")
	if err != nil {
		t.Fatal(err)
	}
	if g := b.Readings["axles/diameter"]; g == nil || g.Size != 5 || g.Unit != "mm" || b.Password != "open sesame" || b.Rounds != "axles/rounds" || b.TLS == nil {
		t.Errorf("read %+v", b)
	}
	const spindle = "[[readings]]\ntopic = \"axles/%[1]s\"\ncharacteristic = \"D\"\nunit = \"mm\"\nsize = 4\nlot_topic = \"axles/lot\"\nstreams = [\"spindle %[1]s\"]\n"
	one, two := fmt.Sprintf(spindle, "1"), fmt.Sprintf(spindle, "2")
	if b, err = read(head + one + two); err != nil {
		t.Fatal(err)
	}
	if err := s.SetLot("axles/lot", "K-2231"); err != nil {
		t.Fatal(err)
	}
	if g := b.Readings["axles/2"]; g == nil || len(g.Streams) != 1 || g.Streams[0] != "spindle 2" || !b.Lots["axles/lot"] || g.Lot() != "K-2231" {
		t.Errorf("read %+v", b)
	}
	for _, wrong := range []string{
		head + one + one, head + one + strings.Replace(two, "size = 4", "size = 5", 1), head + one + strings.Replace(two, "streams", "#streams", 1),
		head + strings.Replace(one, "[\"spindle 1\"]", "[\"a\", \"b\"]", 1), head + strings.Replace(one, "axles/lot", "axles/1", 1), head + strings.Replace(one, "axles/lot", "axles/+", 1),
		"client = \"x\"\nrounds = \"r\"\n", head, head + "rounds = \"r\"\npassword = \"x\"\n",
		head + "[[readings]]\ntopic = \"a/#\"\ncharacteristic = \"D\"\nunit = \"mm\"\nsize = 5\n",
		head + "[[readings]]\ntopic = \"a\"\ncharacteristic = \"D\"\nsize = 5\n",
	} {
		if _, err := read(wrong); err == nil {
			t.Errorf("this was taken: %s", wrong)
		}
	}
}

// TestAReadingOfTheBrokerThatCannotBeTakesNoSubgroupWithIt: what the server would refuse is
// shown at the station when it comes, and the readings around it are a whole subgroup.
func TestAReadingOfTheBrokerThatCannotBeTakesNoSubgroupWithIt(t *testing.T) {
	t.Parallel()
	r := serve(t)
	_, token := r.enrol(t, plant.Device{Kind: plant.Sender, Name: "Broker", Station: r.Station.ID})
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	hub := broker.New(&broker.Options{InlineClient: true, Logger: slog.New(slog.DiscardHandler)})
	if err := hub.AddHook(new(allow.AllowHook), nil); err != nil {
		t.Fatal(err)
	}
	if err := hub.AddListener(listeners.NewNet("t", l)); err != nil {
		t.Fatal(err)
	}
	if err := hub.Serve(); err != nil {
		t.Fatal(err)
	}
	defer hub.Close()
	folder := t.TempDir()
	c := mqttCmd{Config: filepath.Join(folder, "broker.toml")}
	c.Server, c.TokenFile, c.Spool = r.url, filepath.Join(folder, "token"), filepath.Join(folder, "spool")
	for path, text := range map[string]string{
		c.TokenFile: token,
		c.Config: "broker = \"tcp://" + l.Addr().String() + "\"\nclient = \"holdfast\"\n" +
			"[[readings]]\ntopic = \"diameter\"\ncharacteristic = \"" + r.Diameter.Name + "\"\nunit = \"mm\"\nsize = 5\n",
	} {
		if err := os.WriteFile(path, []byte(text), 0o600); err != nil {
			t.Fatal(err)
		}
	}
	running, stop := context.WithCancel(t.Context())
	var g errgroup.Group
	g.Go(func() error { return c.Run(running, slog.New(slog.DiscardHandler)) })
	defer func() {
		stop()
		if err := g.Wait(); err != nil {
			t.Error(err)
		}
	}()
	soon := func(what string, done func() bool) {
		t.Helper()
		for end := time.Now().Add(20 * time.Second); !done(); time.Sleep(20 * time.Millisecond) {
			if time.Now().After(end) {
				t.Fatal(what)
			}
		}
	}
	soon("the topic is not subscribed to", func() bool {
		client, ok := hub.Clients.Get("holdfast")
		return ok && len(client.State.Subscriptions.GetAll()) == 1
	})
	for _, payload := range []string{"14.991", "14.990 mm", "14.9915", "0.5902 in", "14.990", "14.990", "14.992"} {
		if err := hub.Publish("diameter", []byte(payload), false, 1); err != nil {
			t.Fatal(err)
		}
	}
	var readings []int64
	soon("no subgroup came", func() bool {
		return r.Pool().QueryRow(t.Context(), `select readings from subgroup where characteristic_id = $1`, r.Diameter.ID).Scan(&readings) == nil
	})
	if fmt.Sprint(readings) != "[14991 14990 14990 14990 14992]" {
		t.Errorf("on record: %v", readings)
	}
	_, body := r.visit(t, "operator1").get("/station/" + r.Station.ID.String())
	for _, line := range []string{"14.9915", "0.5902 in"} {
		if !strings.Contains(body, line) {
			t.Errorf("the station does not show %q", line)
		}
	}
}
