// Holdfast is a server for live control charting: operators key in subgroups,
// Postgres keeps them, frozen limits and run rules judge them, and every dashboard
// hears of it at once. This package is the command line and joins the parts.
package main

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"os/signal"
	"runtime/debug"
	"strings"
	"syscall"

	"github.com/alecthomas/kong"

	"holdfast/internal/plant"
	"holdfast/internal/store"

	_ "time/tzdata" // plants have time zones, boxes may not
)

// cli is the command line. Every flag may also come from the environment variable
// that its help names.
type cli struct {
	LogFormat string `help:"How the log is written: text or json." enum:"text,json" default:"text" env:"HOLDFAST_LOG_FORMAT"`
	LogLevel  string `help:"What is logged: debug, info, warn or error." enum:"debug,info,warn,error" default:"info" env:"HOLDFAST_LOG_LEVEL"`

	Serve    serveCmd    `cmd:"" help:"Serve the plant."`
	Demo     demoCmd     `cmd:"" help:"Serve an invented plant on this machine, to try Holdfast."`
	Check    checkCmd    `cmd:"" help:"Say what is wrong with this machine before it is used; takes the flags of serve."`
	Migrate  migrateCmd  `cmd:"" help:"Bring the database to the newest schema and stop."`
	User     userCmd     `cmd:"" help:"People who may sign in."`
	Audit    auditCmd    `cmd:"" help:"Verify that the record is whole."`
	Messages messagesCmd `cmd:"" help:"Messages that leave the box when nobody takes something."`
	Gauge    gaugeCmd    `cmd:"" help:"Send what a gauge tells on a serial port or standard input."`
	MQTT     mqttCmd     `cmd:"" name:"mqtt" help:"Send what is published at the plant's broker."`
	Health   healthCmd   `cmd:"" help:"Ask a running server whether it is ready; for container and service checks."`
	Calc     calcCmd     `cmd:"" help:"Answer a question of the statistics: JSON in, JSON out."`
	Qualify  qualifyCmd  `cmd:"" help:"Recompute the reference values on this machine: the installation qualification."`
	Version  versionCmd  `cmd:"" help:"Print the version."`
}

func main() {
	// One signal asks for an orderly stop; a second one ends the program at once.
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	context.AfterFunc(ctx, stop)
	err := run(ctx, os.Args[1:])
	stop()
	if err == nil || errors.Is(err, context.Canceled) && ctx.Err() != nil {
		return
	}
	if !errors.Is(err, errNoCommand) { // the help has said it
		fmt.Fprintln(os.Stderr, "holdfast:", told(err))
	}
	os.Exit(status(err))
}

// told is an error in words for whoever typed the command. Of what somebody can mend, its
// sentence is the whole of it; what cannot be understood leads to the help.
func told(err error) string {
	if pe, ok := errors.AsType[*plant.Error](err); ok {
		return pe.Message
	}
	pe, ok := errors.AsType[*kong.ParseError](err)
	if !ok {
		return err.Error()
	}
	command := pe.Context.Model.Name
	if node := pe.Context.Selected(); node != nil {
		command = node.FullPath()
	}
	said := pe.Error()
	if role, extra := strings.CutPrefix(said, "unexpected argument "); extra && plant.Roles(plant.AllRoles).Has(plant.Role(role)) {
		said += fmt.Sprintf("; a role is said with --role %s", role)
	}
	return fmt.Sprintf("%s. %s --help says what can be typed", strings.TrimSuffix(said, "."), command)
}

// sentence is an error as a sentence of its own.
func sentence(err error) string { return strings.TrimSuffix(err.Error(), ".") + "." }

// errNoCommand is a command line that stops before it names what to do.
var errNoCommand = errors.New("no command is named")

// status is 2 for a command line that cannot be understood and 1 for what went wrong.
func status(err error) int {
	if _, ok := errors.AsType[*kong.ParseError](err); ok || errors.Is(err, errNoCommand) {
		return 2
	}
	return 1
}

func run(ctx context.Context, args []string) error {
	var c cli
	parser, err := kong.New(&c, kong.Name("holdfast"),
		kong.Description("Live control charting for a plant: samples, limits, run rules, and what to do about a signal."),
		kong.ConfigureHelp(kong.HelpOptions{Compact: true}))
	if err != nil {
		return err
	}
	k, err := parser.Parse(args)
	if pe, ok := errors.AsType[*kong.ParseError](err); ok && unfinished(pe.Context) {
		parser.Stdout = os.Stderr
		if err := pe.Context.PrintUsage(false); err != nil {
			return err
		}
		return errNoCommand
	}
	if err != nil {
		return err
	}
	k.BindTo(ctx, (*context.Context)(nil))
	k.Bind(c.logger())
	return k.Run()
}

// unfinished reports whether all that was typed is understood and a command is still to be
// named: nothing was typed, or a command that only holds others.
func unfinished(c *kong.Context) bool {
	if c.Error != nil {
		return false
	}
	node := c.Selected()
	if node == nil {
		node = c.Model.Node
	}
	return len(node.Children) > 0
}

func (c *cli) logger() *slog.Logger {
	var level slog.Level
	_ = level.UnmarshalText([]byte(c.LogLevel)) // the enum has checked it
	opts := &slog.HandlerOptions{Level: level}
	if c.LogFormat == "json" {
		return slog.New(slog.NewJSONHandler(os.Stderr, opts))
	}
	return slog.New(slog.NewTextHandler(os.Stderr, opts))
}

// version is what the build says of itself.
func version() string {
	info, ok := debug.ReadBuildInfo()
	if !ok {
		return "unknown"
	}
	return versionOf(info)
}

// versionOf names the version and the commit once: the version that a checkout is given
// ends in the commit already, and says itself that files were changed.
func versionOf(info *debug.BuildInfo) string {
	v := info.Main.Version
	for _, s := range info.Settings {
		if s.Key == "vcs.revision" && len(s.Value) >= 12 && !strings.Contains(v, s.Value[:12]) {
			v += " " + s.Value[:12]
		}
		if s.Key == "vcs.modified" && s.Value == "true" && !strings.Contains(v, "+dirty") {
			v += " (changed)"
		}
	}
	return v
}

type versionCmd struct{}

func (versionCmd) Run() error {
	fmt.Println("holdfast", version())
	return nil
}

type migrateCmd struct {
	database
}

func (c *migrateCmd) Run(ctx context.Context, log *slog.Logger) error {
	return c.with(ctx, log, func(db reached) error {
		log.Info("the database has the newest schema")
		return nil
	})
}

// firstPlant makes a plant where the database holds none yet, so that people can be
// added to it.
func firstPlant(ctx context.Context, st *store.Store, name, zone string) error {
	_, err := st.Plant(ctx)
	if !plant.IsKind(err, plant.NotFound) {
		return err
	}
	return createPlant(ctx, st, name, zone)
}
