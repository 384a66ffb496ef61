package desk

import (
	"context"
	"crypto/rand"
	"crypto/sha256"
	"crypto/subtle"
	"encoding/base64"
	"encoding/hex"
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"sync"

	"golang.org/x/crypto/argon2"

	"tenthmark/session"
)

// Secrets keeps what sign-in secrets are checked against: argon2id hashes in a file of
// their own beside the ledger, readable by the daemon's user alone. They are not in the
// ledger, because the ledger is exported and published; its events carry the SHA-256 of
// each hash, so that one that was exchanged behind the daemon's back does not count.
//
// The file is a JSON object from that SHA-256 to the hash. A new hash is stored before
// its event is recorded and old ones stay, so a crash in between locks nobody out. It
// belongs into every backup; without it nobody can sign in until new secrets are set.
type Secrets struct {
	path string
	cost Cost
	mu   sync.Mutex // guards hashes and the file; held while the file is written
	busy chan struct{}

	hashes map[string]string
}

// Cost is what one check of a secret costs.
type Cost struct {
	Passes, MemoryKiB uint32
	Lanes             uint8
}

// FullCost is RFC 9106, section 4, second recommended option: 64 MiB, 3 passes, 4 lanes.
var FullCost = Cost{Passes: 3, MemoryKiB: 64 << 10, Lanes: 4}

const (
	saltBytes, hashBytes = 16, 32
	// ShortestSecret and LongestSecret bound a secret, in bytes.
	ShortestSecret, LongestSecret = 8, 256
)

// OpenSecrets reads the file; one that is not there yet is empty. New secrets are hashed
// at the given cost, FullCost anywhere but in tests.
func OpenSecrets(path string, cost Cost) (*Secrets, error) {
	s := &Secrets{path: path, cost: cost, busy: make(chan struct{}, 1), hashes: map[string]string{}}
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return s, nil
	}
	if err == nil {
		err = json.Unmarshal(text, &s.hashes)
	}
	if err != nil {
		return nil, &session.Fault{Code: "secrets-unreadable", Message: fmt.Sprintf("The file of sign-in secrets %s cannot be read.", path), Hint: "Restore it from the backup. Permission 0600, owned by the daemon's user.", Err: err}
	}
	return s, nil
}

// CheckSecret says whether a secret can be one.
func CheckSecret(secret string) error {
	if len(secret) < ShortestSecret || len(secret) > LongestSecret {
		return session.Refuse("bad-secret", fmt.Sprintf("A secret has %d to %d bytes.", ShortestSecret, LongestSecret), "Several words in a row are easy to remember and hard to guess.")
	}
	return nil
}

// Keep hashes a secret, stores the hash durably and gives the SHA-256 that an event
// binds it by.
func (s *Secrets) Keep(secret string) (binding string, err error) {
	if err := CheckSecret(secret); err != nil {
		return "", err
	}
	salt := make([]byte, saltBytes)
	_, _ = rand.Read(salt) // never fails: crypto/rand ends the program instead
	hash := s.encode(secret, salt, s.cost)
	binding = bind(hash)
	s.mu.Lock()
	defer s.mu.Unlock()
	s.hashes[binding] = hash
	if err := s.write(); err != nil {
		delete(s.hashes, binding)
		return "", &session.Fault{Code: "secrets-not-written", Message: "The secret could not be stored.", Hint: "Check the disk and the permission of the file of sign-in secrets.", Err: err}
	}
	return binding, nil
}

// Matches says whether a secret is the one behind a binding. It takes the same time
// for a binding that is not known.
func (s *Secrets) Matches(binding, secret string) (bool, error) {
	if len(secret) > LongestSecret {
		return false, nil
	}
	s.mu.Lock()
	hash, known := s.hashes[binding]
	s.mu.Unlock()
	if !known || bind(hash) != binding {
		s.encode(secret, make([]byte, saltBytes), s.cost)
		if binding != "" {
			return false, session.Refuse("secret-altered", "The stored secret is not the one that the ledger knows.", "Have an administrator set a new one, and ask who had access to the file of secrets.")
		}
		return false, nil
	}
	salt, c, err := decode(hash)
	if err != nil {
		return false, fmt.Errorf("check secret: %w", err)
	}
	return subtle.ConstantTimeCompare([]byte(s.encode(secret, salt, c)), []byte(hash)) == 1, nil
}

func bind(hash string) string {
	sum := sha256.Sum256([]byte(hash))
	return hex.EncodeToString(sum[:])
}

// encode hashes one secret at a time, so that sign-in cannot be used to fill the memory.
func (s *Secrets) encode(secret string, salt []byte, c Cost) string {
	s.busy <- struct{}{}
	defer func() { <-s.busy }()
	key := argon2.IDKey([]byte(secret), salt, c.Passes, c.MemoryKiB, c.Lanes, hashBytes)
	b64 := base64.RawStdEncoding
	return fmt.Sprintf("$argon2id$v=%d$m=%d,t=%d,p=%d$%s$%s", argon2.Version, c.MemoryKiB, c.Passes, c.Lanes, b64.EncodeToString(salt), b64.EncodeToString(key))
}

func decode(hash string) (salt []byte, c Cost, err error) {
	var version int
	var rest string
	if _, err = fmt.Sscanf(hash, "$argon2id$v=%d$m=%d,t=%d,p=%d$%s", &version, &c.MemoryKiB, &c.Passes, &c.Lanes, &rest); err != nil {
		return nil, c, fmt.Errorf("stored hash: %w", err)
	}
	if version != argon2.Version || len(rest) < base64.RawStdEncoding.EncodedLen(saltBytes) {
		return nil, c, errors.New("stored hash: not of this form")
	}
	salt, err = base64.RawStdEncoding.DecodeString(rest[:base64.RawStdEncoding.EncodedLen(saltBytes)])
	return salt, c, err
}

// write replaces the file: beside it, synced, renamed, the folder synced.
func (s *Secrets) write() error {
	text, err := json.MarshalIndent(s.hashes, "", "  ")
	if err != nil {
		return err
	}
	beside := s.path + ".new"
	f, err := os.OpenFile(beside, os.O_WRONLY|os.O_CREATE|os.O_TRUNC, 0o600)
	if err != nil {
		return err
	}
	_, err = f.Write(append(text, '\n'))
	if err = errors.Join(err, f.Sync(), f.Close()); err != nil {
		return err
	}
	if err := os.Rename(beside, s.path); err != nil {
		return err
	}
	return syncFolder(filepath.Dir(s.path))
}

// syncFolder makes a rename durable. Where a folder cannot be opened or synced
// (Windows) the rename is as durable as that system makes it.
func syncFolder(path string) error {
	f, err := os.Open(path)
	if err != nil {
		return nil
	}
	_ = f.Sync()
	return f.Close()
}

// EnrolFirst registers the first administrator of a ledger that has nobody yet: what
// init does. It is recorded as the daemon's doing, for there is nobody else.
func (d *Desk) EnrolFirst(ctx context.Context, s *Secrets, p session.Person, secret string) error {
	check := func(b *session.Book) error { _, err := b.EnrolFirst(p); return err }
	if err := d.View(ctx, check); err != nil {
		return err
	}
	binding, err := s.Keep(secret)
	if err != nil {
		return err
	}
	p.SecretSHA256 = binding
	_, err = d.Do(ctx, session.Daemon, func(b *session.Book) ([]session.Draft, error) { return b.EnrolFirst(p) })
	return err
}
