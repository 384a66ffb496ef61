package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"strings"
	"time"

	"github.com/rs/zerolog"
	"golang.org/x/term"

	"tenthmark/session"
	"tenthmark/session/desk"
	"tenthmark/session/ledger"
)

// secretsFile is where the hashes of the sign-in secrets lie: beside the ledger, which
// holds what binds them.
func (c *config) secretsFile() string { return c.Ledger.Path + ".secrets" }

// enrolAdministrator registers the first administrator in a ledger that was just made.
func enrolAdministrator(ctx context.Context, c *config, p session.Person, secret string) (err error) {
	l, err := ledger.Open(ctx, ledger.Options{Path: c.Ledger.Path, KeyFile: c.Ledger.Key})
	if err != nil {
		return err
	}
	defer func() { err = errors.Join(err, l.Close()) }()
	secrets, err := desk.OpenSecrets(c.secretsFile(), desk.FullCost)
	if err != nil {
		return err
	}
	d, err := desk.New(ctx, record{l}, desk.NewSystemClock(time.Local), zerolog.Nop())
	if err != nil {
		return err
	}
	working, stop := context.WithCancel(ctx)
	stopped := make(chan error, 1)
	go func() { stopped <- d.Run(working) }()
	err = d.EnrolFirst(ctx, secrets, p, secret)
	stop()
	if ended := <-stopped; ended != nil && !errors.Is(ended, context.Canceled) {
		err = errors.Join(err, ended)
	}
	return err
}

// askSecret reads a secret: at a terminal unseen and twice, otherwise the first line.
func askSecret(in io.Reader, out io.Writer, who string) (string, error) {
	f, isFile := in.(*os.File)
	if !isFile || !term.IsTerminal(int(f.Fd())) {
		line, err := bufio.NewReader(in).ReadString('\n')
		if err != nil && line == "" {
			return "", fmt.Errorf("read the secret of %s from standard input: %w", who, err)
		}
		return strings.TrimRight(line, "\r\n"), nil
	}
	var typed [2]string
	for i, prompt := range []string{"Secret of " + who + ": ", "Once more: "} {
		fmt.Fprint(out, prompt)
		b, err := term.ReadPassword(int(f.Fd()))
		fmt.Fprintln(out)
		if err != nil {
			return "", fmt.Errorf("read the secret: %w", err)
		}
		typed[i] = string(b)
	}
	if typed[0] != typed[1] {
		return "", session.Refuse("secrets-differ", "The two secrets are not the same.", "Start init again.")
	}
	return typed[0], nil
}
