package bench

import (
	"errors"
	"fmt"
	"io"
	"io/fs"
	"net/http"
	"path"
	"strings"
	"time"

	"tenthmark/session"
)

const maxEvents = 10_000

// events hands out the ledger's lines byte for byte as they are stored, one to a line.
func (b *Bench) events(c *call) error {
	after, err := c.number("after", -1, -1, 1<<62)
	if err != nil {
		return err
	}
	limit, err := c.number("limit", 1000, 1, maxEvents)
	if err != nil {
		return err
	}
	q := c.URL.Query()
	found, err := b.Records.Events(c.Context(), Query{After: after, Limit: int(limit), Run: q.Get("run"), Kind: q.Get("kind"), Actor: q.Get("actor")})
	if err != nil {
		return err
	}
	c.w.Header().Set("Content-Type", "application/jsonl")
	for _, l := range found {
		if _, err := c.w.Write(append(l.Line[:len(l.Line):len(l.Line)], '\n')); err != nil {
			return nil // whoever asked has gone
		}
	}
	return nil
}

func (b *Bench) checkpoint(c *call) error {
	text, err := b.Records.Checkpoint(c.Context())
	if err != nil {
		return err
	}
	if text == "" {
		return session.Refuse("no-checkpoint", "No checkpoint was signed yet.", "One is signed at each publication, at the day's end and when the daemon stops.")
	}
	c.w.Header().Set("Content-Type", "text/plain; charset=utf-8")
	_, _ = io.WriteString(c.w, text)
	return nil
}

type backupRequest struct {
	File string `json:"file"`
}

// backup copies the ledger to a file on the daemon's computer. The copying records
// itself.
func (b *Bench) backup(c *call) error {
	if b.Backup == nil {
		return session.Refuse("no-backup", "This daemon makes no backup on request.", "Use its schedule in the configuration.")
	}
	q, err := read[backupRequest](c, maxBody)
	if err != nil {
		return err
	}
	if q.File == "" || strings.ContainsRune(q.File, 0) {
		return session.Refuse("bad-file", "No file is named for the backup.", "Name one that is not there yet.")
	}
	report, err := b.Backup(c.Context(), q.File)
	if err != nil {
		return err
	}
	return c.reply(http.StatusOK, report)
}

// documentTypes are the kinds of files that are handed out.
var documentTypes = map[string]string{
	".json": "application/json", ".jsonl": "application/jsonl", ".csv": "text/csv; charset=utf-8", ".svg": "image/svg+xml",
	".html": "text/html; charset=utf-8", ".pdf": "application/pdf", ".xml": "application/xml", "": "text/plain; charset=utf-8", ".txt": "text/plain; charset=utf-8",
}

// document hands out a file of a published run.
func (b *Bench) document(c *call) error {
	run, name := c.PathValue("run"), c.PathValue("name")
	kind, known := documentTypes[path.Ext(name)]
	missing := session.Refuse("no-document", fmt.Sprintf("Run %s has no document %q.", run, name), "Documents are there once the run is published; run.json lists them.")
	if b.Documents == nil || !known || name != path.Base(name) || !fs.ValidPath(name) || strings.Contains(name, `\`) {
		return missing
	}
	err := b.view(c.Context(), func(book *session.Book) error {
		if book.Summaries[run] == nil {
			return session.Refuse("unknown-run", fmt.Sprintf("There is no run %q.", run), "Check the name, or list the runs.")
		}
		return nil
	})
	if err != nil {
		return err
	}
	f, err := b.Documents.Open(run, name)
	if errors.Is(err, fs.ErrNotExist) {
		return missing
	}
	if err != nil {
		return err
	}
	defer f.Close()
	return c.send(f, name, kind)
}

// send streams a file. A drawing is shown with everything in it switched off.
func (c *call) send(f fs.File, name, kind string) error {
	h := c.w.Header()
	h.Set("Content-Type", kind)
	h.Set("Content-Disposition", fmt.Sprintf("inline; filename=%q", name))
	h.Set("Content-Security-Policy", "default-src 'none'; style-src 'unsafe-inline'; img-src data:; sandbox")
	if s, can := f.(io.ReadSeeker); can {
		var modified time.Time
		if info, err := f.Stat(); err == nil {
			modified = info.ModTime()
		}
		http.ServeContent(c.w, c.Request, name, modified, s)
		return nil
	}
	_, _ = io.Copy(c.w, f) // whoever asked may have gone
	return nil
}

// outbox lists the runs that are signed and wait for the drop.
func (b *Bench) outbox(c *call) error {
	list := []Waiting{}
	if b.Documents != nil {
		list = append(list, b.Documents.Waiting()...)
	}
	return c.reply(http.StatusOK, map[string]any{"waiting": list})
}
