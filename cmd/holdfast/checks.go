package main

import (
	"context"
	"crypto/x509"
	"errors"
	"fmt"
	"io/fs"
	"net"
	"os"
	"path/filepath"
	"slices"
	"syscall"
	"time"

	"holdfast/internal/certs"
	"holdfast/internal/localpg"
	"holdfast/internal/store"
)

const (
	diskLow  = 5 << 30
	diskGone = 1 << 30 // a checkpoint and an hour's log must still fit

	slowDisk = 15 * time.Millisecond // for one flush: every save waits for one
	clockOff = 2 * time.Second       // between this machine and the database's
	expiring = 30 * 24 * time.Hour
)

func checkDatabase(ctx context.Context, about, url, ownerURL string) []finding {
	ctx, cancel := context.WithTimeout(ctx, 10*time.Second)
	defer cancel()
	i, err := store.Inspect(ctx, url)
	if err != nil {
		return []finding{{wrong, about, "The database cannot be reached: " + sentence(err), "Compare DATABASE_URL with the server's address, its pg_hba.conf and the role's password."}}
	}
	skew := time.Since(i.Now)
	out := []finding{{good, about, fmt.Sprintf("PostgreSQL %s answers, database %s, role %s.", i.Version, i.Database, i.User), ""}}
	worse := func(g grade, text, do string) { out = append(out, finding{g, about, text, do}) }
	if i.VersionNumber < localpg.OldestVersion*10000 {
		worse(wrong, fmt.Sprintf("PostgreSQL %s is too old.", i.Version), fmt.Sprintf("Use version %d or newer.", localpg.OldestVersion))
	}
	if !i.Durable {
		worse(wrong, "fsync or full_page_writes is off: a power cut could take rounds that were answered.", "Switch both on in postgresql.conf.")
	}
	if i.Encoding != "UTF8" {
		worse(wrong, "The database's encoding is "+i.Encoding+".", "Make it anew with encoding UTF8.")
	}
	if !i.Checksums {
		worse(look, "Data pages have no checksums: a failing disk may go unnoticed.", "pg_checksums --enable, while the server is stopped.")
	}
	if i.Connections < 40 {
		worse(look, fmt.Sprintf("The server takes %d connections; this program uses up to 18.", i.Connections), "")
	}
	if skew.Abs() > clockOff {
		worse(wrong, fmt.Sprintf("This machine's clock and the database's are %s apart.", skew.Abs().Round(time.Second)), "Let both follow the same time server.")
	}
	if i.SchemaBroken {
		worse(wrong, "A migration stopped half-way.", "Restore the backup from before it, or call for help; do not serve.")
	}
	if i.Tables && !i.Guarded {
		worse(look, "This role can change samples and ledger: the database does not guard them.", "Give DATABASE_URL the role holdfast_app and DATABASE_OWNER_URL the owner (deploy/roles.sql).")
	}
	if ownerURL == "" {
		if !i.Tables && !i.MayCreate {
			worse(wrong, "The role may not make tables, and no owner is named.", "Set DATABASE_OWNER_URL.")
		}
		return out
	}
	o, err := store.Inspect(ctx, ownerURL)
	switch {
	case err != nil:
		worse(wrong, "The database cannot be reached as its owner: "+err.Error()+".", "Compare DATABASE_OWNER_URL.")
	case o.Database != i.Database:
		worse(wrong, fmt.Sprintf("The two addresses lead to different databases, %s and %s.", i.Database, o.Database), "")
	case !o.MayCreate:
		worse(wrong, "The owner may not make tables.", "Grant it create on schema public.")
	}
	return out
}

func checkPrivate(ctx context.Context, dir, bin string) []finding {
	if dir == "" {
		return []finding{{wrong, "database", "It is not said where the record is.", "--database-url for a PostgreSQL of your own, or --data for a private one in a folder."}}
	}
	if at, err := localpg.Attach(dir, localpg.Database); err == nil {
		if i, err := store.Inspect(ctx, at); err == nil {
			return []finding{{good, "database", fmt.Sprintf("The private PostgreSQL %s of %s runs, and answers.", i.Version, dir), ""}}
		}
	}
	b, err := localpg.Find(bin)
	if err != nil {
		return []finding{{wrong, "database", sentence(err), ""}}
	}
	return []finding{{good, "database", fmt.Sprintf("PostgreSQL %d in %s will run a private server in %s.", b.Major, b.Dir, dir), ""}}
}

// checkFolder looks at the folder that data and certificates go to, or at its nearest
// parent while it is not there.
func checkFolder(dir string) []finding {
	at := dir
	info, err := os.Stat(at)
	for errors.Is(err, fs.ErrNotExist) && filepath.Dir(at) != at {
		at = filepath.Dir(at)
		info, err = os.Stat(at)
	}
	if err != nil {
		return []finding{{wrong, "folder", sentence(err), ""}}
	}
	var out []finding
	if at == dir && info.Mode().Perm()&0o022 != 0 {
		out = append(out, finding{wrong, "folder", fmt.Sprintf("Others may write in %s (mode %o).", dir, info.Mode().Perm()), "chmod go-w " + dir})
	}
	took, err := flush(at)
	if err != nil {
		text := fmt.Sprintf("This user may not write in %s: %s.", at, withoutPath(err))
		if at != dir {
			text = fmt.Sprintf("%s cannot be made: %s", dir, "this"+text[len("This"):])
		}
		return append(out, finding{wrong, "folder", text, "Let the user that runs the server write there, or choose another folder."})
	}
	var disk syscall.Statfs_t
	if err := syscall.Statfs(at, &disk); err != nil {
		return append(out, finding{wrong, "disk", sentence(err), ""})
	}
	free := int64(disk.Bavail) * disk.Bsize
	gib := fmt.Sprintf("%.1f GiB are free where %s is.", float64(free)/(1<<30), dir)
	switch {
	case free < diskGone:
		out = append(out, finding{wrong, "disk", gib, "Make room: when the disk is full nothing can be saved."})
	case free < diskLow:
		out = append(out, finding{look, "disk", gib, "Make room, and let the plant's monitor watch it."})
	default:
		out = append(out, finding{good, "disk", gib, ""})
	}
	if took > slowDisk {
		return append(out, finding{look, "disk", fmt.Sprintf("Making a write durable takes %s: every save waits for that.", took.Round(100*time.Microsecond)), "A local solid-state disk takes about a millisecond."})
	}
	return append(out, finding{good, "disk", fmt.Sprintf("Making a write durable takes %s.", took.Round(10*time.Microsecond)), ""})
}

// withoutPath is the reason in an error about a file whose name means nothing to anybody.
func withoutPath(err error) error {
	if pe, ok := errors.AsType[*fs.PathError](err); ok {
		return pe.Err
	}
	return err
}

// flush is the median time of making one page durable in a folder.
func flush(dir string) (time.Duration, error) {
	f, err := os.CreateTemp(dir, ".holdfast-check-*")
	if err != nil {
		return 0, err
	}
	defer os.Remove(f.Name())
	defer f.Close()
	page := make([]byte, 8192)
	took := make([]time.Duration, 15)
	for i := range took {
		began := time.Now()
		if _, err := f.Write(page); err != nil {
			return 0, err
		}
		if err := f.Sync(); err != nil {
			return 0, err
		}
		took[i] = time.Since(began)
	}
	slices.Sort(took)
	return took[len(took)/2], nil
}

// unsynchronised is STA_UNSYNC of adjtimex(2).
const unsynchronised = 0x40

// followsTimeServer reports whether the machine's clock follows one. An error means that
// the system does not tell.
func followsTimeServer() (bool, error) {
	var t syscall.Timex
	if _, err := syscall.Adjtimex(&t); err != nil {
		return false, err
	}
	return t.Status&unsynchronised == 0, nil
}

func checkClock() finding {
	follows, err := followsTimeServer()
	now := time.Now()
	switch {
	case err != nil:
		return finding{look, "clock", "The system does not tell whether its clock follows a time server: " + sentence(err), ""}
	case !follows:
		return finding{look, "clock", fmt.Sprintf("It is %s, and the clock follows no time server.", now.Format(time.RFC1123)),
			"Samples are ordered by time: let the machine follow the plant's time server (timedatectl set-ntp true)."}
	}
	return finding{good, "clock", fmt.Sprintf("It is %s, and the clock follows a time server.", now.Format(time.RFC1123)), ""}
}

func (c *checkCmd) checkCertificate() []finding {
	if c.TLS != "auto" {
		if _, _, err := net.SplitHostPort(c.Addr); err != nil {
			return nil // checkPort says it
		}
		way, err := c.prepare(c.Addr, c.stateDir(), time.Now)
		switch {
		case err != nil:
			return []finding{{wrong, "https", sentence(err), ""}}
		case way.leaf != nil:
			return []finding{ending(way.leaf(), time.Now())}
		case c.TLS == "proxy":
			return []finding{{good, "https", fmt.Sprintf("A proxy at %v ends TLS.", c.TrustedProxy), ""}}
		}
		return []finding{{look, "https", "Plain http: only this machine can reach the server.", "For tablets and boards: --tls auto, files or proxy."}}
	}
	dir := c.authorityDir(c.stateDir())
	if dir == "" {
		return []finding{{wrong, "https", "--tls auto needs a folder for its authority.", "Say it with --tls-dir."}}
	}
	root, err := certs.ReadRoot(dir)
	if errors.Is(err, fs.ErrNotExist) {
		return []finding{{good, "https", "An authority will be made in " + dir + " at the first start.", ""}}
	}
	if err != nil {
		return []finding{{wrong, "https", sentence(err), ""}}
	}
	f := ending(root, time.Now())
	f.text += " Its fingerprint is " + certs.Fingerprint(root) + "."
	return []finding{f}
}

func ending(c *x509.Certificate, now time.Time) finding {
	f := finding{good, "https", fmt.Sprintf("The certificate of %s holds until %s.", c.Subject.CommonName, c.NotAfter.Format(time.DateOnly)), ""}
	switch left := c.NotAfter.Sub(now); {
	case left <= 0:
		f.grade, f.do = wrong, "It has ended: exchange it."
	case left < expiring:
		f.grade, f.do = look, "Exchange it in time."
	case now.Before(c.NotBefore):
		f.grade, f.do = wrong, "It does not hold yet: is the clock right?"
	}
	return f
}
