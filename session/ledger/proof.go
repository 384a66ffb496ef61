package ledger

import (
	"bytes"
	"context"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"slices"
	"strings"

	"golang.org/x/mod/sumdb/tlog"
)

// ProofSchema names the form of proof.json.
const ProofSchema = "tenthmark/proof/1"

// Proof is the content of proof.json: inclusion proofs of the events in events.jsonl
// against one signed checkpoint. Hashes are lower-case hexadecimal.
type Proof struct {
	Schema     string       `json:"schema"`
	Origin     string       `json:"origin"`
	PublicKey  string       `json:"public_key"`  // the key of the checkpoint's signature; trust your own copy, not this one
	KeyChanges []string     `json:"key_changes"` // signed notes, oldest first, each by the key before
	Checkpoint string       `json:"checkpoint"`  // signed note, C2SP tlog-checkpoint
	Hash       string       `json:"hash"`
	Events     []EventProof `json:"events"` // in the order of the lines in events.jsonl
}

// EventProof is the RFC 6962 audit path of one event.
type EventProof struct {
	Seq  int64    `json:"seq"`
	Leaf string   `json:"leaf"` // SHA-256 of a zero byte and the line without its line break
	Path []string `json:"path"` // from the leaf's sibling upwards
}

const hashName = "rfc6962-sha256"

// RunProof gives the lines of events.jsonl and the content of proof.json for the events
// with these numbers. It signs a checkpoint when the newest one does not cover them.
func (l *Ledger) RunProof(ctx context.Context, seqs []int64) (eventsJSONL, proofJSON []byte, err error) {
	if len(seqs) == 0 {
		return nil, nil, errors.New("proof: no events named")
	}
	seqs = slices.Compact(slices.Sorted(slices.Values(seqs)))
	signed, err := l.Checkpoint(ctx)
	if err != nil {
		return nil, nil, err
	}
	if err := l.enter(ctx); err != nil {
		return nil, nil, err
	}
	defer l.leave()
	return l.prove(ctx, l.keys, signed, seqs)
}

// prove assembles the two files. Own turn assumed.
func (s *store) prove(ctx context.Context, keys keyring, signed []byte, seqs []int64) (lines, proof []byte, err error) {
	head, err := s.checkNewest(signed, keys)
	if err != nil {
		return nil, nil, err
	}
	key := keys[keys.at(head.Size)].key
	p := Proof{Schema: ProofSchema, Origin: head.Origin, PublicKey: key, KeyChanges: []string{}, Checkpoint: string(signed), Hash: hashName}
	if p.KeyChanges, err = s.statements(ctx, head.Size); err != nil {
		return nil, nil, err
	}
	nodes := s.hashes(ctx)
	var events bytes.Buffer
	for _, seq := range seqs {
		e, body, err := s.proveOne(ctx, head, seq, nodes)
		if err != nil {
			return nil, nil, err
		}
		p.Events = append(p.Events, e)
		events.Write(append(body, '\n'))
	}
	proof, err = json.MarshalIndent(p, "", " ")
	return events.Bytes(), append(proof, '\n'), err
}

// proveOne makes and checks the path of one event from its bytes.
func (s *store) proveOne(ctx context.Context, head Head, seq int64, nodes *hashes) (EventProof, []byte, error) {
	rows, err := s.rows(ctx, seq, 1)
	if err != nil {
		return EventProof{}, nil, explain("read", s.path, err)
	}
	if len(rows) == 0 || rows[0].seq != seq {
		return EventProof{}, nil, fmt.Errorf("prove event %d: there is none", seq)
	}
	path, err := tlog.ProveRecord(head.Size, seq, nodes)
	if err != nil {
		return EventProof{}, nil, fmt.Errorf("prove event %d: %w", seq, err)
	}
	leaf := tlog.RecordHash(rows[0].body)
	if err := tlog.CheckRecord(path, head.Size, head.Root, seq, leaf); err != nil {
		return EventProof{}, nil, alteredFault(s.path, altered(seq, "does not fit the signed checkpoint"))
	}
	return EventProof{Seq: seq, Leaf: hex.EncodeToString(leaf[:]), Path: hexPath(path)}, rows[0].body, nil
}

// statements gives the signed key changes that lead to the key of a checkpoint of the
// given size.
func (s *store) statements(ctx context.Context, size int64) ([]string, error) {
	changes, err := s.keyChanges(ctx)
	if err != nil {
		return nil, explain("read", s.path, err)
	}
	out := []string{}
	for _, e := range changes {
		var c KeyChanged
		if err := fillInto(e.Body, &c); err != nil {
			return nil, altered(e.Seq, "is a key change that cannot be read")
		}
		if e.Seq < size {
			out = append(out, c.Statement)
		}
	}
	return out, nil
}

func hexPath(path []tlog.Hash) []string {
	out := make([]string, len(path))
	for i := range path {
		out[i] = hex.EncodeToString(path[i][:])
	}
	return out
}

// Prove gives the audit path of one event in the tree of the given size.
func (s *store) Prove(ctx context.Context, seq, size int64) ([]tlog.Hash, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	path, err := tlog.ProveRecord(size, seq, s.hashes(ctx))
	if err != nil {
		return nil, fmt.Errorf("prove event %d in %d: %w", seq, size, err)
	}
	return path, nil
}

// ProveGrowth gives the consistency proof that the tree of size newer continues the one
// of size older.
func (s *store) ProveGrowth(ctx context.Context, older, newer int64) ([]tlog.Hash, error) {
	if err := s.enter(ctx); err != nil {
		return nil, err
	}
	defer s.leave()
	path, err := tlog.ProveTree(newer, older, s.hashes(ctx))
	if err != nil {
		return nil, fmt.Errorf("prove growth from %d to %d: %w", older, newer, err)
	}
	return path, nil
}

// TextProof gives the proof of one event as the text file of C2SP tlog-proof (draft):
// index, path and the signed checkpoint, enough to check the event's bytes offline.
func TextProof(seq int64, path []tlog.Hash, checkpoint []byte) []byte {
	var b strings.Builder
	fmt.Fprintf(&b, "c2sp.org/tlog-proof@v1\nindex %d\n", seq)
	for _, h := range path {
		b.WriteString(h.String() + "\n")
	}
	b.WriteString("\n")
	b.Write(checkpoint)
	return []byte(b.String())
}
