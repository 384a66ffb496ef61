package main

import (
	"context"
	"io/fs"
	"os"
	"path/filepath"
	"time"

	"tenthmark/session"
	"tenthmark/session/bench"
	"tenthmark/session/desk"
)

// furnish makes the outbox and the page of a daemon that has ledger, desk and stations.
func (d *daemon) furnish(zone *time.Location) error {
	d.outbox = newOutbox(d)
	secrets, err := desk.OpenSecrets(d.config.secretsFile(), desk.FullCost)
	if err != nil {
		return err
	}
	b, err := bench.New(bench.Options{
		Desk: d.desk, Stations: d.stations, Records: records{d.ledger}, Documents: documents{d},
		Backup:  func(ctx context.Context, file string) (any, error) { return d.backupTo(ctx, file) },
		Setting: d.config.setting, SignIn: d.config.Access.SignIn, Secrets: secrets,
		TLS: d.config.Bench.TLSCert != "", Zone: zone, Version: version(), Log: d.log,
	})
	if err != nil {
		return err
	}
	d.server = b.Server()
	return nil
}

// documents is the drop as the bench shows it.
type documents struct{ d *daemon }

// Open gives a file of a published run.
func (o documents) Open(run, name string) (fs.File, error) {
	if session.CheckName("document", name) != nil {
		return nil, fs.ErrNotExist
	}
	return os.Open(filepath.Join(o.d.config.Publish.Folder, o.d.folderName(run), name))
}

// folderName is the name of a run's folder in the drop.
func (d *daemon) folderName(run string) string {
	if d.config.Publish.Prefix != "" {
		return d.config.Publish.Prefix + "-" + run
	}
	return run
}
