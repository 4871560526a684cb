package admin

import (
	"context"
	"net/http"
	"strings"
	"time"

	"holdfast/web/ui"
)

// aboutAddress is the page about this installation.
const aboutAddress = home + "/about"

// Installation is what the program knows of itself and of what it stands on. Zero values
// stand for what is not known or not there.
type Installation struct {
	Version, Go, System string
	Processors          int
	Started             time.Time

	Address     string
	HTTPS       HTTPS
	Fingerprint string    // of the plant's own authority
	Certificate time.Time // when it ends
	Names       []string  // that it holds

	Postgres, Database string
	Private            bool // the program runs its own server
	Bytes              int64
	Schema             int
	Guarded, Durable   bool
	Checksums          bool
	Skew               time.Duration // of the database's clock against this machine's
	TimeServer         TimeServer

	Chains int
	Root   string // over all heads, in hexadecimal digits

	Disk, DiskFree int64 // of the data folder, in bytes; 0 where it is not on this machine

	Saves, Refused, Failed uint64 // rounds since the start
	Sockets                int64
	Waiting, GivenUp       int // messages to the outside
}

// HTTPS is how browsers reach the server.
type HTTPS string

const (
	HTTPSOff   HTTPS = "off"   // plain http, this machine only
	HTTPSAuto  HTTPS = "auto"  // the plant's own authority
	HTTPSFiles HTTPS = "files" // certificate in files
	HTTPSProxy HTTPS = "proxy" // a proxy ends TLS
)

// TimeServer is whether the machine's clock follows one.
type TimeServer string

const (
	TimeServerFollowed TimeServer = "followed"
	TimeServerNone     TimeServer = "none"
	TimeServerUntold   TimeServer = "untold" // the system does not say
)

// About reads the installation.
type About func(ctx context.Context) (Installation, error)

// aboutGroup is a titled list of facts.
type aboutGroup struct {
	Title string
	Facts []aboutFact
}

type aboutFact struct {
	Label, Value string
	Fixed        bool   // digits to be compared one by one
	Warning      string // what to do; "" while it is well
}

func (a *Admin) aboutPage(w http.ResponseWriter, r *http.Request) error {
	i, err := a.about(r.Context())
	if err != nil {
		return err
	}
	s := shellFor(r, ui.FrameOf(r).Words.T("about.title"))
	return ui.Render(w, r, http.StatusOK, aboutPage(s, aboutGroups(s, a.machine, i, ui.FrameOf(r).Now)))
}

// Below these an administrator has to act.
const (
	littleDisk  = 5 << 30
	tooLittle   = 1 << 30
	soonEnding  = 30 * 24 * time.Hour
	clocksApart = 2 * time.Second
)

func aboutGroups(s ui.Shell, machine string, i Installation, now time.Time) []aboutGroup {
	w := s.Words
	warn := func(when bool, do string) string {
		if when {
			return do
		}
		return ""
	}
	yes := func(b bool, good, bad string) string {
		if b {
			return good
		}
		return bad
	}
	program := aboutGroup{w.T("about.program"), []aboutFact{
		{Label: w.T("about.version"), Value: i.Version},
		{Label: w.T("about.built"), Value: i.Go + ", " + i.System},
		{Label: w.T("about.machine"), Value: w.T("about.machine-value", machine, s.Format.Count(i.Processors))},
		{Label: w.T("about.started"), Value: instant(s.Format, i.Started)},
		{Label: w.T("about.zone"), Value: s.Format.Zone.String()},
		{Label: w.T("about.work"), Value: w.T("about.work-value", i.Saves, i.Refused, i.Failed, i.Sockets), Warning: warn(i.Failed > 0, w.T("about.failed-do"))},
	}}
	if i.Waiting+i.GivenUp > 0 {
		program.Facts = append(program.Facts, aboutFact{Label: w.T("about.outbox"), Value: w.T("about.outbox-value", i.Waiting, i.GivenUp),
			Warning: warn(i.GivenUp > 0, w.T("about.outbox-do"))})
	}
	way := aboutGroup{w.T("about.way"), []aboutFact{
		{Label: w.T("about.address"), Value: i.Address},
		{Label: w.T("about.https"), Value: w.T("about.https." + string(i.HTTPS)), Warning: warn(i.HTTPS == HTTPSOff, w.T("about.https-do"))},
	}}
	if !i.Certificate.IsZero() {
		way.Facts = append(way.Facts, aboutFact{Label: w.T("about.certificate"), Value: s.Format.Date(i.Certificate),
			// The plant's own authority renews by itself, long before.
			Warning: warn(i.Certificate.Sub(now) < soonEnding, w.T("about.certificate-do"))})
	}
	if len(i.Names) > 0 {
		way.Facts = append(way.Facts, aboutFact{Label: w.T("about.names"), Value: strings.Join(i.Names, ", ")})
	}
	if i.Fingerprint != "" {
		way.Facts = append(way.Facts, aboutFact{Label: w.T("about.fingerprint"), Value: i.Fingerprint, Fixed: true})
	}
	data := aboutGroup{w.T("about.data"), []aboutFact{
		{Label: w.T("about.postgres"), Value: w.T("about.postgres-value", i.Postgres, i.Database)},
		{Label: w.T("about.server"), Value: yes(i.Private, w.T("about.server-private"), w.T("about.server-own"))},
		{Label: w.T("about.size"), Value: size(s.Format, i.Bytes)},
		{Label: w.T("about.guard"), Value: yes(i.Guarded, w.T("about.guard-yes"), w.T("about.guard-no")), Warning: warn(!i.Guarded, w.T("about.guard-do"))},
		{Label: w.T("about.durable"), Value: yes(i.Durable, w.T("about.durable-yes"), w.T("about.durable-no")), Warning: warn(!i.Durable, w.T("about.durable-do"))},
		{Label: w.T("about.checksums"), Value: yes(i.Checksums, w.T("about.checksums-yes"), w.T("about.checksums-no")), Warning: warn(!i.Checksums, w.T("about.checksums-do"))},
		{Label: w.T("about.clock"), Value: w.T("about.clock-value", s.Format.Number(i.Skew.Abs().Seconds(), 1)), Warning: warn(i.Skew.Abs() > clocksApart, w.T("about.clock-do"))},
	}}
	if i.TimeServer != "" {
		data.Facts = append(data.Facts, aboutFact{Label: w.T("about.time-server"), Value: w.T("about.time-server." + string(i.TimeServer)),
			Warning: warn(i.TimeServer == TimeServerNone, w.T("about.time-server-do"))})
	}
	if i.Disk > 0 {
		data.Facts = append(data.Facts, aboutFact{Label: w.T("about.disk"), Value: w.T("about.disk-value", size(s.Format, i.DiskFree), size(s.Format, i.Disk)),
			Warning: warn(i.DiskFree < tooLittle, w.T("about.disk-now")) + warn(i.DiskFree >= tooLittle && i.DiskFree < littleDisk, w.T("about.disk-do"))})
	}
	record := aboutGroup{w.T("about.record"), []aboutFact{
		{Label: w.T("about.chains"), Value: s.Format.Count(i.Chains)},
		{Label: w.T("about.root"), Value: i.Root, Fixed: true},
	}}
	return []aboutGroup{program, way, data, record}
}

// size is a number of bytes as people read it: in binary units with one decimal.
func size(f ui.Format, bytes int64) string {
	units := [...]string{"KiB", "MiB", "GiB", "TiB"}
	v, u := float64(bytes)/1024, 0
	for v >= 1024 && u < len(units)-1 {
		v, u = v/1024, u+1
	}
	return f.Number(v, 1) + " " + units[u]
}
