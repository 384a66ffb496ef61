package ledger

import (
	"context"
	"database/sql"
	"encoding/base64"
	"encoding/json"
	"errors"
	"fmt"
	"strconv"
	"strings"

	"golang.org/x/mod/sumdb/note"
	"golang.org/x/mod/sumdb/tlog"
)

// Head is what a checkpoint states: the tree of a ledger at one size.
type Head struct {
	Origin string
	Size   int64
	Root   tlog.Hash
}

// text gives the three lines of C2SP tlog-checkpoint v1.0.0.
func (h Head) text() string {
	return fmt.Sprintf("%s\n%d\n%s\n", h.Origin, h.Size, h.Root)
}

// ReadCheckpoint reads a signed checkpoint and checks its signature against the public
// key. A checkpoint with further lines is refused: we never write any.
func ReadCheckpoint(signed []byte, publicKey string) (Head, error) {
	text, err := openNote(signed, publicKey)
	if err != nil {
		return Head{}, err
	}
	h, err := parseHead(text)
	if err != nil {
		return Head{}, err
	}
	if !strings.HasPrefix(publicKey, h.Origin+"+") {
		return Head{}, fmt.Errorf("checkpoint of %s signed by another ledger's key", h.Origin)
	}
	return h, nil
}

func parseHead(text string) (Head, error) {
	lines := strings.Split(text, "\n")
	if len(lines) != 4 || lines[3] != "" {
		return Head{}, errors.New("checkpoint: malformed")
	}
	size, err := parseSize(lines[1])
	if err != nil {
		return Head{}, err
	}
	root, err := tlog.ParseHash(lines[2])
	if err != nil {
		return Head{}, fmt.Errorf("checkpoint: %w", err)
	}
	h := Head{Origin: lines[0], Size: size, Root: root}
	if h.text() != text {
		return Head{}, errors.New("checkpoint: malformed")
	}
	return h, checkOrigin(h.Origin)
}

// readUnsigned reads what a checkpoint says, whoever signed it.
func readUnsigned(signed []byte) (Head, error) {
	text, _, found := strings.Cut(string(signed), "\n\n")
	if !found {
		return Head{}, errors.New("checkpoint: not a signed note")
	}
	return parseHead(text + "\n")
}

func parseSize(text string) (int64, error) {
	n, err := strconv.ParseInt(text, 10, 64)
	if err != nil || n < 0 || strconv.FormatInt(n, 10) != text {
		return 0, fmt.Errorf("checkpoint: malformed size %q", text)
	}
	return n, nil
}

// openNote gives the text of a signed note whose signature by the key is good. The
// library overlooks the two unused bits of the last base64 digit; we do not.
func openNote(signed []byte, publicKey string) (string, error) {
	v, err := note.NewVerifier(publicKey)
	if err != nil {
		return "", fmt.Errorf("public key: %w", err)
	}
	n, err := note.Open(signed, note.VerifierList(v))
	if err != nil {
		return "", err
	}
	for _, sig := range n.Sigs {
		if _, err := base64.StdEncoding.Strict().DecodeString(sig.Base64); err != nil {
			return "", errors.New("signature is not written canonically")
		}
	}
	return n.Text, nil
}

// sign gives the signed note and makes sure that it can be opened again: the library
// signs some texts that it later refuses.
func (s signer) sign(text string) ([]byte, error) {
	signed, err := note.Sign(&note.Note{Text: text}, s)
	if err != nil {
		return nil, fmt.Errorf("sign: %w", err)
	}
	if _, err := openNote(signed, s.public); err != nil {
		return nil, fmt.Errorf("sign: own signature does not open: %w", err)
	}
	return signed, nil
}

// Checkpoint signs the present tree, stores the note and gives it. Called again
// without a new event it gives the same note: a log never signs twice for one size.
func (l *Ledger) Checkpoint(ctx context.Context) ([]byte, error) {
	if err := l.enter(ctx); err != nil {
		return nil, err
	}
	defer l.leave()
	if err := l.sound(); err != nil {
		return nil, err
	}
	if l.covered == l.edge.size {
		signed, err := l.newestCheckpoint(ctx)
		return signed, explain("read checkpoint", l.path, err)
	}
	signed, err := l.signHead(&l.edge)
	if err != nil {
		return nil, err
	}
	if err := l.write(ctx, change{next: l.edge, checkpoint: signed}); err != nil {
		return nil, err
	}
	l.catchUp(ctx)
	return signed, nil
}

func (l *Ledger) signHead(f *frontier) ([]byte, error) {
	return l.signer.sign(Head{Origin: l.Origin(), Size: f.size, Root: f.root()}.text())
}

// NewestCheckpoint gives the newest stored checkpoint.
func (s *store) NewestCheckpoint(ctx context.Context) ([]byte, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	signed, err := s.newestCheckpoint(ctx)
	return signed, explain("read checkpoint", s.path, err)
}

func (s *store) newestCheckpoint(ctx context.Context) ([]byte, error) {
	var signed []byte
	err := s.db.QueryRowContext(ctx, `SELECT note FROM checkpoint ORDER BY size DESC LIMIT 1`).Scan(&signed)
	return signed, err
}

// Checkpoints gives all stored checkpoints, oldest first.
func (s *store) Checkpoints(ctx context.Context) ([][]byte, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	notes, err := s.checkpointRows(ctx)
	if err != nil {
		return nil, explain("read checkpoints", s.path, err)
	}
	out := make([][]byte, len(notes))
	for i := range notes {
		out[i] = notes[i].note
	}
	return out, nil
}

type sizedNote struct {
	size int64
	note []byte
}

func (s *store) checkpointRows(ctx context.Context) ([]sizedNote, error) {
	rs, err := s.db.QueryContext(ctx, `SELECT size, note FROM checkpoint ORDER BY size`)
	if err != nil {
		return nil, err
	}
	defer rs.Close()
	var out []sizedNote
	for rs.Next() {
		var n sizedNote
		if err := rs.Scan(&n.size, &n.note); err != nil {
			return nil, err
		}
		out = append(out, n)
	}
	return out, rs.Err()
}

// readKeys follows the key changes from event 0 on. Own turn assumed.
func (s *store) readKeys(ctx context.Context) (keyring, error) {
	first, err := s.rows(ctx, 0, 1)
	if err != nil {
		return nil, explain("read", s.path, err)
	}
	if len(first) == 0 || first[0].seq != 0 {
		return nil, alteredFault(s.path, altered(0, "is missing"))
	}
	keys, err := begin(first[0].body)
	if err != nil {
		return nil, alteredFault(s.path, err)
	}
	changes, err := s.keyChanges(ctx)
	if err != nil {
		return nil, explain("read", s.path, err)
	}
	for _, e := range changes {
		if keys, err = keys.change(e.Seq, e.Body); err != nil {
			return nil, alteredFault(s.path, err)
		}
	}
	return keys, nil
}

// checkTail checks the newest checkpoint against the stored tree and recomputes the
// hashes of the events behind it. It is what can be checked at every start; the
// whole is the business of Verify. Own turn assumed.
func (s *store) checkTail(ctx context.Context, keys keyring) (frontier, int64, error) {
	signed, err := s.newestCheckpoint(ctx)
	if err != nil && !errors.Is(err, sql.ErrNoRows) {
		return frontier{}, 0, explain("read checkpoint", s.path, err)
	}
	var head Head
	if err == nil {
		if head, err = s.checkNewest(signed, keys); err != nil {
			return frontier{}, 0, alteredFault(s.path, err)
		}
	}
	edge, err := s.frontierAt(ctx, head.Size)
	if err != nil {
		return frontier{}, 0, alteredFault(s.path, err)
	}
	if head.Size > 0 && edge.root() != head.Root {
		return frontier{}, 0, alteredFault(s.path, &Finding{-1, fmt.Sprintf("the tree does not fit the signed checkpoint of %d events", head.Size)})
	}
	return edge, head.Size, s.rehash(ctx, &edge)
}

func (s *store) checkNewest(signed []byte, keys keyring) (Head, error) {
	head, err := readUnsigned(signed)
	if err != nil {
		return Head{}, &Finding{-1, "the newest checkpoint cannot be read"}
	}
	if _, err := ReadCheckpoint(signed, keys[keys.at(head.Size)].key); err != nil {
		return Head{}, &Finding{-1, fmt.Sprintf("the signature of the checkpoint of %d events is not good", head.Size)}
	}
	return head, nil
}

// rehash advances edge over all events behind it, from their bytes.
func (s *store) rehash(ctx context.Context, edge *frontier) error {
	for {
		batch, err := s.rows(ctx, edge.size, batchRows)
		if err != nil {
			return explain("read", s.path, err)
		}
		for _, r := range batch {
			if r.seq != edge.size {
				return alteredFault(s.path, altered(edge.size, "is missing"))
			}
			if !samePacked(r.nodes, edge.push(tlog.RecordHash(r.body), nil)) {
				return alteredFault(s.path, altered(r.seq, "does not fit its stored hashes"))
			}
		}
		if len(batch) < batchRows {
			return nil
		}
	}
}

func fillInto(line []byte, content any) error {
	fill, err := Fill(line)
	if err != nil {
		return err
	}
	return json.Unmarshal(fill, content)
}
