package main

import (
	"bytes"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"

	"tenthmark/session"
	"tenthmark/session/ledger"
)

func runLedgerVerify(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("verify", "Recomputes every hash from the events' bytes, checks every signature, replays the state,\ncompares the published documents, and names the first bad event.", complaints)
	key := f.String("key", "", "the public key to trust, a `file` from another place than the ledger")
	drop := f.String("drop", "", "check one published `folder` instead; needs --key and nothing else")
	asJSON := f.Bool("json", false, "print the report as JSON")
	var checkpoints fileList
	f.Var(&checkpoints, "checkpoint", "a checkpoint `file` that was kept elsewhere; may be given several times")
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet); err != nil {
		return misuse(complaints, err)
	}
	if *drop != "" {
		if *key == "" {
			return misuse(complaints, errors.New("--drop needs --key: a folder cannot vouch for itself"))
		}
		return verifyDrop(*drop, *key, *asJSON, out, complaints)
	}
	v := verification{flags: f}
	report, err := v.run(ctx, *key, checkpoints)
	if err != nil {
		return complain(complaints, err)
	}
	return tellReport(out, report, *asJSON)
}

// verifyDrop checks one published folder with the public key alone.
func verifyDrop(dir, keyFile string, asJSON bool, out, complaints io.Writer) int {
	key, err := ledger.ReadPublicKey(keyFile)
	if err != nil {
		return complain(complaints, err)
	}
	r, err := ledger.VerifyFolder(dir, ledger.FolderOptions{PublicKey: key})
	if err != nil {
		return complain(complaints, err)
	}
	if asJSON {
		return tellJSON(out, r, r.OK())
	}
	for _, finding := range r.Findings {
		fmt.Fprintf(out, "WRONG: %v\n", finding)
	}
	fmt.Fprintf(out, "%s: %d events of %s proven by the signed checkpoint of %d events; %d files fit their hashes, %d documents fit an event.\n",
		dir, r.Events, r.Origin, r.Size, r.Files, r.Documents)
	if r.Documents == 0 {
		fmt.Fprintln(out, "No event in this folder names its documents: whether they are the ones that were signed only the ledger can tell.")
	}
	return tellVerdict(out, r.OK())
}

// verification checks a whole ledger, with the state that its events lead to and the
// documents that they name.
type verification struct {
	flags     ledgerFlags
	book      *session.Book
	published []session.PublishedBody
}

func (v *verification) run(ctx context.Context, keyFile string, checkpoints fileList) (ledger.Report, error) {
	key, err := publicKey(keyFile)
	if err != nil {
		return ledger.Report{}, err
	}
	outside, err := checkpoints.read()
	if err != nil {
		return ledger.Report{}, err
	}
	v.book = session.NewBook()
	opt := ledger.VerifyOptions{PublicKey: key, Checkpoints: outside, Event: v.event, Snapshot: v.snapshot}
	if daemon := v.flags.remote(); daemon != nil {
		return verifyDaemon(ctx, daemon, opt)
	}
	c, err := v.flags.config()
	if err != nil {
		return ledger.Report{}, err
	}
	report, err := ledger.Verify(ctx, c.Ledger.Path, opt)
	if err != nil {
		return report, inUse(c, err)
	}
	v.documents(c.Publish.Folder, &report)
	return report, nil
}

// event replays the state and notes what was published.
func (v *verification) event(e ledger.Entry) error {
	if err := v.book.Apply(e.Body); err != nil {
		return err
	}
	if v.book.Next%5000 == 0 {
		v.book.Shelve() // bounds the memory
	}
	h, err := ledger.ParseHeader(e.Body)
	if err != nil || session.Kind(h.Kind) != session.RunPublished {
		return err
	}
	var p session.PublishedBody
	content, err := ledger.Fill(e.Body)
	if err == nil {
		err = json.Unmarshal(content, &p)
	}
	v.published = append(v.published, p)
	return err
}

// snapshot compares the stored state with the replayed one.
func (v *verification) snapshot(s ledger.Snapshot) error {
	v.book.Shelve()
	want, err := json.Marshal(v.book)
	if err != nil {
		return err
	}
	if !bytes.Equal(want, s.State) {
		return errors.New("it differs from the replayed one")
	}
	return nil
}

// documents compares the published files with their hashes in the ledger. A folder that
// is not there was taken away by another program, which it is for.
func (v *verification) documents(drop string, report *ledger.Report) {
	if drop == "" {
		return
	}
	for _, p := range v.published {
		dir := filepath.Join(drop, filepath.Base(p.Folder))
		if _, err := os.Stat(dir); err != nil {
			continue
		}
		for name, want := range p.Files {
			text, err := os.ReadFile(filepath.Join(dir, filepath.Base(name)))
			sum := sha256.Sum256(text)
			if err != nil || hex.EncodeToString(sum[:]) != want {
				report.Findings = append(report.Findings, &ledger.Finding{Seq: -1, What: "the published file " + filepath.Join(dir, name) + " is missing or was altered"})
			}
		}
	}
}

// tellReport prints what was found.
func tellReport(out io.Writer, r ledger.Report, asJSON bool) int {
	if asJSON {
		return tellJSON(out, r, r.OK())
	}
	if first := r.First(); first != nil {
		fmt.Fprintf(out, "FIRST: %v\n", first)
	}
	for _, finding := range r.Findings {
		fmt.Fprintf(out, "WRONG: %v\n", finding)
	}
	fmt.Fprintf(out, "%s: %d events, root %s.\n", r.Origin, r.Events, r.Root)
	fmt.Fprintf(out, "%d checkpoints have a good signature; the newest covers %d events, %d came after it.\n", r.Checkpoints, r.Covered, max(0, r.Events-r.Covered))
	if r.Outside > 0 {
		fmt.Fprintf(out, "%d checkpoints from outside fit: history only grew since then.\n", r.Outside)
	}
	if !r.Trusted {
		fmt.Fprintln(out, "Checked against the key that the ledger itself names. With --key and --checkpoint, kept elsewhere, it would show more.")
	}
	return tellVerdict(out, r.OK())
}

func tellVerdict(out io.Writer, good bool) int {
	if good {
		fmt.Fprintln(out, "OK")
		return exitDone
	}
	fmt.Fprintln(out, "NOT OK: keep these files as they are for investigation.")
	return exitFailed
}

func tellJSON(out io.Writer, report any, good bool) int {
	e := json.NewEncoder(out)
	e.SetIndent("", "  ")
	if err := e.Encode(report); err != nil || !good {
		return exitFailed
	}
	return exitDone
}

func runLedgerCompare(ctx context.Context, args []string, out, complaints io.Writer) int {
	f := newLedgerFlags("compare", "Proves that the ledger still begins with the events of an older checkpoint.\nUse: tenthmark ledger compare [FLAGS] OLD-CHECKPOINT", complaints)
	if code, done := parse(f.FlagSet, args); done {
		return code
	}
	if err := only(f.FlagSet, "OLD-CHECKPOINT"); err != nil {
		return misuse(complaints, err)
	}
	older, err := fileList{f.Arg(0)}.read()
	if err != nil {
		return complain(complaints, err)
	}
	if daemon := f.remote(); daemon != nil {
		report, err := verifyDaemon(ctx, daemon, ledger.VerifyOptions{Checkpoints: older})
		if err != nil {
			return complain(complaints, err)
		}
		return tellReport(out, report, false)
	}
	g, err := f.compare(ctx, older[0])
	switch {
	case errors.Is(err, ledger.ErrAltered):
		fmt.Fprintf(out, "WRONG: %v\n", err)
		return tellVerdict(out, false)
	case err != nil:
		return complain(complaints, err)
	}
	fmt.Fprintf(out, "%s: the %d events of the newest checkpoint begin with the %d of the older one; proof of %d hashes:\n", g.Newer.Origin, g.Newer.Size, g.Older.Size, len(g.Path))
	for _, h := range g.Path {
		fmt.Fprintln(out, h)
	}
	return tellVerdict(out, true)
}

func (f ledgerFlags) compare(ctx context.Context, older []byte) (ledger.Growth, error) {
	r, err := f.reader(ctx)
	if err != nil {
		return ledger.Growth{}, err
	}
	g, err := r.Compare(ctx, older)
	return g, errors.Join(err, r.Close())
}

// reader opens the ledger for looking.
func (f ledgerFlags) reader(ctx context.Context) (*ledger.Reader, error) {
	c, err := f.config()
	if err != nil {
		return nil, err
	}
	r, err := ledger.OpenReader(ctx, c.Ledger.Path)
	return r, inUse(c, err)
}
