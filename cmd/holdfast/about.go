package main

import (
	"context"
	"fmt"
	"runtime"
	"syscall"
	"time"

	"holdfast/internal/certs"
	"holdfast/web/admin"
)

// about gathers what the administrator's page says of this installation.
func (p *program) about(ctx context.Context) (admin.Installation, error) {
	i := admin.Installation{
		Version: version(), Go: runtime.Version(), System: runtime.GOOS + "/" + runtime.GOARCH, Processors: runtime.NumCPU(),
		Started: p.started, Address: p.URL(), HTTPS: p.Transport.way(), Private: p.DataDir != "",
	}
	if p.Transport.root != nil {
		i.Fingerprint = certs.Fingerprint(p.Transport.root)
	}
	if p.Transport.leaf != nil {
		leaf := p.Transport.leaf()
		i.Certificate, i.Names = leaf.NotAfter, namesIn(leaf)
	}
	db, err := p.store.Inspect(ctx)
	if err != nil {
		return i, err
	}
	i.Postgres, i.Database, i.Bytes, i.Guarded, i.Durable, i.Checksums = db.Version, db.Database, db.Bytes, db.Guarded, db.Durable, db.Checksums
	i.Skew = time.Since(db.Now)
	switch follows, err := followsTimeServer(); {
	case err != nil:
		i.TimeServer = admin.TimeServerUntold
	case !follows:
		i.TimeServer = admin.TimeServerNone
	default:
		i.TimeServer = admin.TimeServerFollowed
	}
	heads, err := p.store.Heads(ctx)
	if err != nil {
		return i, err
	}
	i.Chains, i.Root = len(heads), fmt.Sprintf("%x", rootOf(heads))
	if p.DataDir != "" {
		var disk syscall.Statfs_t
		if err := syscall.Statfs(p.DataDir, &disk); err == nil {
			i.Disk, i.DiskFree = int64(disk.Blocks)*disk.Bsize, int64(disk.Bavail)*disk.Bsize
		}
	}
	messages, err := p.store.OutboxState(ctx)
	if err != nil {
		return i, err
	}
	i.Waiting, i.GivenUp = messages.Waiting, messages.GivenUp
	n := p.store.Counts()
	i.Saves, i.Refused, i.Failed, i.Sockets = n.Saves, n.Refused, n.Failed, p.hub.Stats().Sockets
	return i, nil
}

// way is how browsers reach the server, as the page about it names that.
func (s secured) way() admin.HTTPS {
	switch {
	case s.root != nil:
		return admin.HTTPSAuto
	case s.config != nil:
		return admin.HTTPSFiles
	case s.https:
		return admin.HTTPSProxy
	}
	return admin.HTTPSOff
}
