package main

import (
	"cmp"
	"context"
	"encoding/json"
	"fmt"
	"os"
	"strings"
	"time"

	"tenthmark/session"
	"tenthmark/session/desk"
	"tenthmark/session/ledger"
)

func runInit(ctx context.Context, args []string, io stdio) int {
	f := newFlags("init", "Makes the ledger and its signing key, once. Nothing is overwritten.", io.err)
	file := f.String("c", "config.toml", "configuration `file`")
	administrator := f.String("administrator", "", "`name` of the first administrator, whose secret is asked for (where people sign in)")
	printed := f.String("printed", "", "the administrator's `name` as it is printed; default: the same")
	if code, done := parse(f, args); done {
		return code
	}
	c, err := loadConfig(*file)
	if err != nil {
		return complain(io.err, err)
	}
	secret, person := "", session.Person{Name: *administrator, PrintedName: cmp.Or(*printed, *administrator)}
	if *administrator != "" {
		if _, err := session.NewBook().EnrolFirst(person); err != nil {
			return complain(io.err, err)
		}
		if secret, err = askSecret(io.in, io.err, *administrator); err != nil {
			return complain(io.err, err)
		}
		if err := desk.CheckSecret(secret); err != nil {
			return complain(io.err, err)
		}
	}
	if err := createLedger(ctx, c, time.Now()); err != nil {
		return complain(io.err, err)
	}
	if *administrator != "" {
		if err := enrolAdministrator(ctx, c, person, secret); err != nil {
			return complain(io.err, err)
		}
	}
	fmt.Fprintf(io.out, "The ledger is %s, its signing key %s and the public key %s.pub.\n", c.Ledger.Path, c.Ledger.Key, c.Ledger.Key)
	fmt.Fprintln(io.out, "Keep the public key and, from time to time, a checkpoint on another computer; back the signing key up apart from the ledger.")
	return exitDone
}

// createLedger makes the ledger that a configuration names.
func createLedger(ctx context.Context, c *config, now time.Time) error {
	origin := c.origin()
	founding := ledger.Founding{Path: c.Ledger.Path, Origin: origin, KeyFile: c.Ledger.Key}
	return ledger.Create(ctx, founding, func(seq int64, publicKey string) ([]byte, error) {
		body, err := json.Marshal(ledger.Created{Origin: origin, PublicKey: publicKey, Software: "tenthmark " + version()})
		if err != nil {
			return nil, err
		}
		_, offset := now.Zone()
		return session.Event{
			Seq: seq, At: session.At(now), OffsetMin: offset / 60, Actor: session.Daemon, Kind: ledger.KindCreated, Body: body,
		}.Encode()
	})
}

// origin names the ledger in its signatures: as configured, or after the computer.
func (c *config) origin() string {
	if c.Ledger.Origin != "" {
		return c.Ledger.Origin
	}
	host, err := os.Hostname()
	if err != nil || host == "" {
		host = "bench"
	}
	return "tenthmark." + strings.ReplaceAll(host, " ", "-")
}
