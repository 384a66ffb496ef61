package ledger

import (
	"context"
	"errors"
	"time"

	lib "modernc.org/sqlite/lib"
)

// VerifyOptions says what to check a ledger against.
type VerifyOptions struct {
	// PublicKey is the key that the one who verifies brings along. Without it the
	// ledger's own word is taken, and the report says so.
	PublicKey string

	// Checkpoints were kept elsewhere: signed notes, in any order. They show a cut-off
	// tail and a record that was rewritten and signed again.
	Checkpoints [][]byte

	// Event sees every event whose bytes fit the tree, in order: for the replay of the
	// state and the documents' hashes. Its error becomes a finding.
	Event func(Entry) error

	// Snapshot sees the stored snapshot when Event has seen the events before its size.
	Snapshot func(Snapshot) error
}

// Report is what Verify found.
type Report struct {
	Path        string        `json:"path"`
	Origin      string        `json:"origin"`
	Events      int64         `json:"events"`
	Root        string        `json:"root"`        // base64, of the tree recomputed from the events' bytes
	Checkpoints int           `json:"checkpoints"` // stored ones with a good signature
	Outside     int           `json:"outside"`     // brought along, that fit
	Covered     int64         `json:"covered"`     // events that the newest good checkpoint covers
	Trusted     bool          `json:"trusted"`     // checked against a key brought along
	Findings    []*Finding    `json:"findings"`    // in the order of discovery, at most maxFindings
	Elapsed     time.Duration `json:"elapsed_ns"`
}

// OK says whether nothing was found.
func (r Report) OK() bool { return len(r.Findings) == 0 }

// First gives the first bad event's finding, or else the first finding, or nil.
func (r Report) First() *Finding {
	var first *Finding
	for _, f := range r.Findings {
		if first == nil || first.Seq < 0 && f.Seq >= 0 || f.Seq >= 0 && f.Seq < first.Seq {
			first = f
		}
	}
	return first
}

const maxFindings = 100

// Verify checks the ledger at path, which no daemon may hold. The error says that it
// could not be read; what is wrong with it stands in the report.
func Verify(ctx context.Context, path string, opt VerifyOptions) (Report, error) {
	r, err := openAny(ctx, path)
	if err != nil {
		return damaged(path, err)
	}
	report, err := r.verifyFile(ctx, opt)
	return report, errors.Join(err, r.Close())
}

// damaged turns the refusal of SQLite to read the file into a finding.
func damaged(path string, err error) (Report, error) {
	if sqliteCode(err) == 0 || !isDamage(err) {
		return Report{}, err
	}
	return Report{Path: path, Findings: []*Finding{{-1, "the file is damaged: " + err.Error()}}}, nil
}

// Verify checks the ledger while it is in use, as far as it reaches now. Appends go on
// in between. SQLite's own check of the file's pages is left to the verification at
// rest and of backups.
func (l *Ledger) Verify(ctx context.Context, opt VerifyOptions) (Report, error) {
	c := newChecker(l.store, opt)
	c.live = true
	return c.run(ctx)
}

// Verify checks the file that the reader has open.
func (r *Reader) Verify(ctx context.Context, opt VerifyOptions) (Report, error) {
	return r.verifyFile(ctx, opt)
}

func (r *Reader) verifyFile(ctx context.Context, opt VerifyOptions) (Report, error) {
	pages := make(chan pagesReport, 1)
	go func() { pages <- checkPages(ctx, r.path) }()
	report, err := newChecker(r.store, opt).run(ctx)
	p := <-pages
	for _, said := range p.said {
		report.Findings = append(report.Findings, &Finding{-1, "the file is damaged: " + said})
	}
	return report, errors.Join(err, p.err)
}

// pagesReport is what SQLite says about the file's structure.
type pagesReport struct {
	said []string // nothing when all is well
	err  error
}

// checkPages lets SQLite check the structure of the file, through a connection of its
// own, as it takes a while.
func checkPages(ctx context.Context, path string) pagesReport {
	db, err := connectSQLite(ctx, readerDSN(path, readMode(path)))
	if err != nil {
		return pagesDamage(path, err)
	}
	defer db.Close() // only read from
	rs, err := db.QueryContext(ctx, `PRAGMA integrity_check(10)`)
	if err != nil {
		return pagesDamage(path, err)
	}
	defer rs.Close()
	var p pagesReport
	for rs.Next() {
		var said string
		if err := rs.Scan(&said); err != nil {
			return pagesDamage(path, err)
		}
		if said != "ok" {
			p.said = append(p.said, said)
		}
	}
	if err := rs.Err(); err != nil {
		return pagesDamage(path, err)
	}
	return p
}

func pagesDamage(path string, err error) pagesReport {
	if isDamage(err) {
		return pagesReport{said: []string{err.Error()}}
	}
	return pagesReport{err: explain("verify", path, err)}
}

// isDamage tells a file that says nonsense from one that cannot be read now.
func isDamage(err error) bool {
	if errors.Is(err, context.Canceled) || errors.Is(err, context.DeadlineExceeded) {
		return false
	}
	switch sqliteCode(err) {
	case 0, lib.SQLITE_CORRUPT, lib.SQLITE_NOTADB, lib.SQLITE_ERROR:
		return true
	}
	return false
}
