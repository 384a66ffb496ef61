package ledger

import (
	"bufio"
	"bytes"
	"crypto/sha256"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"maps"
	"os"
	"path/filepath"
	"slices"
	"strings"

	"golang.org/x/mod/sumdb/tlog"
)

// FolderReport is what VerifyFolder found in one published folder.
type FolderReport struct {
	Folder    string     `json:"folder"`
	Origin    string     `json:"origin"`
	Events    int        `json:"events"`    // with a good proof
	Size      int64      `json:"size"`      // events that the checkpoint covers
	Root      string     `json:"root"`      // base64
	Files     int        `json:"files"`     // that fit SHA256SUMS
	Documents int        `json:"documents"` // whose hash stands in a proven event
	Findings  []*Finding `json:"findings"`
}

// OK says whether nothing was found.
func (r FolderReport) OK() bool { return len(r.Findings) == 0 }

// FolderOptions says what to check a published folder against.
type FolderOptions struct {
	PublicKey string            // the ledger's key, from a source that is not the folder
	Event     func(Entry) error // sees every proven event, in order; may be nil
}

// VerifyFolder checks a published folder with nothing but the public key: that each line
// of events.jsonl is the event that proof.json proves, that the checkpoint bears the
// key's signature, that every file fits SHA256SUMS and none is strange, and that files
// whose hash an event names have it. The error says that it could not be read.
func VerifyFolder(dir string, opt FolderOptions) (FolderReport, error) {
	c := folderCheck{dir: dir, opt: opt, report: FolderReport{Folder: dir, Findings: []*Finding{}}}
	if err := c.run(); err != nil {
		return c.report, fmt.Errorf("verify folder %s: %w", dir, err)
	}
	return c.report, nil
}

type folderCheck struct {
	dir    string
	opt    FolderOptions
	report FolderReport
}

func (c *folderCheck) find(seq int64, format string, args ...any) {
	if len(c.report.Findings) < maxFindings {
		c.report.Findings = append(c.report.Findings, &Finding{seq, fmt.Sprintf(format, args...)})
	}
}

func (c *folderCheck) run() error {
	lines, err := readLines(filepath.Join(c.dir, "events.jsonl"))
	if err != nil {
		return err
	}
	text, err := os.ReadFile(filepath.Join(c.dir, "proof.json"))
	if err != nil {
		return err
	}
	if head, p, ok := c.head(text); ok {
		c.events(lines, p, head)
	}
	return c.sums()
}

// readLines gives the lines of a file without their line breaks; the last one must have
// one too.
func readLines(path string) ([][]byte, error) {
	all, err := os.ReadFile(path)
	if err != nil {
		return nil, err
	}
	if len(all) == 0 || all[len(all)-1] != '\n' {
		return nil, fmt.Errorf("%s: the last line is not ended", filepath.Base(path))
	}
	return bytes.Split(all[:len(all)-1], []byte{'\n'}), nil
}

// head opens the checkpoint with the given key or one that it handed over to.
func (c *folderCheck) head(text []byte) (Head, Proof, bool) {
	var p Proof
	d := json.NewDecoder(bytes.NewReader(text))
	d.DisallowUnknownFields()
	if err := d.Decode(&p); err != nil || p.Schema != ProofSchema || p.Hash != hashName {
		c.find(-1, "proof.json is not a proof of the form %s", ProofSchema)
		return Head{}, p, false
	}
	key := c.opt.PublicKey
	for _, signed := range p.KeyChanges {
		if said, err := ReadKeyStatement([]byte(signed), key); err == nil {
			key = said.New
		}
	}
	head, err := ReadCheckpoint([]byte(p.Checkpoint), key)
	if err != nil {
		c.find(-1, "the checkpoint is not signed by the key given: %v", err)
		return Head{}, p, false
	}
	if p.Origin != head.Origin || p.PublicKey != key {
		c.find(-1, "proof.json names another ledger or key than the checkpoint")
	}
	c.report.Origin, c.report.Size, c.report.Root = head.Origin, head.Size, head.Root.String()
	return head, p, true
}

func (c *folderCheck) events(lines [][]byte, p Proof, head Head) {
	if len(lines) != len(p.Events) {
		c.find(-1, "events.jsonl has %d lines, proof.json proves %d events", len(lines), len(p.Events))
	}
	last := int64(-1)
	for i := range min(len(lines), len(p.Events)) {
		e := p.Events[i]
		if e.Seq <= last {
			c.find(e.Seq, "is out of order")
		}
		last = e.Seq
		if what := proven(lines[i], e, head); what != "" {
			c.find(e.Seq, "%s", what)
			continue
		}
		c.report.Events++
		c.documents(lines[i], e.Seq)
		if c.opt.Event == nil {
			continue
		}
		if err := c.opt.Event(Entry{e.Seq, lines[i]}); err != nil {
			c.find(e.Seq, "does not fit: %v", err)
		}
	}
}

// proven says what is wrong with one line and its proof, "" when nothing is.
func proven(line []byte, e EventProof, head Head) string {
	h, err := parseRaw(line)
	if err != nil || h.seq != e.Seq {
		return "is not the line that stands in its place"
	}
	leaf := tlog.RecordHash(line)
	if hex.EncodeToString(leaf[:]) != e.Leaf {
		return "was altered: its line does not have the proven hash"
	}
	path := make(tlog.RecordProof, len(e.Path))
	for i, text := range e.Path {
		raw, err := hex.DecodeString(text)
		if err != nil || len(raw) != tlog.HashSize {
			return "has a malformed proof"
		}
		copy(path[i][:], raw)
	}
	if e.Seq >= head.Size || tlog.CheckRecord(path, head.Size, head.Root, e.Seq, leaf) != nil {
		return "is not part of the signed ledger"
	}
	return ""
}

// documents compares files of the folder with the hashes that an event's content names
// under "documents" or "files": an object from file name to hexadecimal SHA-256.
func (c *folderCheck) documents(line []byte, seq int64) {
	for name, want := range documentsIn(line) {
		got, err := fileSum(filepath.Join(c.dir, filepath.Base(name)))
		switch {
		case errors.Is(err, os.ErrNotExist):
			c.find(seq, "names the document %s, which is missing", name)
		case err != nil || got != want:
			c.find(seq, "names the document %s, which was altered", name)
		default:
			c.report.Documents++
		}
	}
}

func documentsIn(line []byte) map[string]string {
	var as struct {
		Documents json.RawMessage `json:"documents"`
		Files     json.RawMessage `json:"files"`
	}
	if fillInto(line, &as) != nil {
		return nil
	}
	named := map[string]string{}
	for _, list := range []json.RawMessage{as.Documents, as.Files} {
		var some map[string]string
		if list != nil && json.Unmarshal(list, &some) == nil {
			maps.Copy(named, some)
		}
	}
	return named
}

// sumsName is the list of hashes, which lists every other file.
const sumsName = "SHA256SUMS"

// sums checks the folder's files against SHA256SUMS.
func (c *folderCheck) sums() error {
	f, err := os.Open(filepath.Join(c.dir, sumsName))
	if errors.Is(err, os.ErrNotExist) {
		c.find(-1, "the file %s is missing", sumsName)
		return nil
	}
	if err != nil {
		return err
	}
	defer f.Close()
	listed := []string{sumsName}
	lines := bufio.NewScanner(f)
	for lines.Scan() {
		want, name, ok := strings.Cut(lines.Text(), "  ")
		if !ok || name != filepath.Base(name) {
			c.find(-1, "%s has a line that cannot be read", sumsName)
			continue
		}
		listed = append(listed, name)
		if got, err := fileSum(filepath.Join(c.dir, name)); err != nil || got != want {
			c.find(-1, "the file %s is missing or was altered", name)
			continue
		}
		c.report.Files++
	}
	if err := lines.Err(); err != nil {
		return err
	}
	return c.strangers(listed)
}

func (c *folderCheck) strangers(listed []string) error {
	entries, err := os.ReadDir(c.dir)
	if err != nil {
		return err
	}
	for _, e := range entries {
		if !slices.Contains(listed, e.Name()) {
			c.find(-1, "the file %s is not part of the publication", e.Name())
		}
	}
	return nil
}

// fileSum gives the hexadecimal SHA-256 of a file.
func fileSum(path string) (string, error) {
	f, err := os.Open(path)
	if err != nil {
		return "", err
	}
	defer f.Close()
	h := sha256.New()
	if _, err := io.Copy(h, f); err != nil {
		return "", err
	}
	return hex.EncodeToString(h.Sum(nil)), nil
}
