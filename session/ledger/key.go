package ledger

import (
	"crypto/ed25519"
	"crypto/rand"
	"encoding/base64"
	"errors"
	"fmt"
	"os"
	"runtime"
	"strings"

	"golang.org/x/mod/sumdb/note"
	"tenthmark/session"
)

// signer signs with the ledger's key and knows its public form.
type signer struct {
	note.Signer
	public string
}

// checkOrigin refuses names that the signed-note form cannot carry. The library
// would accept some of them and fail later.
func checkOrigin(origin string) error {
	bad := origin == "" || len(origin) > 100 || strings.Contains(origin, "+")
	for _, r := range origin {
		bad = bad || r <= ' ' || r > '~'
	}
	if bad {
		return session.Refuse("bad-origin", fmt.Sprintf("The ledger's name %q cannot be used.", origin),
			"Use up to 100 letters, digits, dots, slashes and hyphens, for example waterworks.example/burettes.")
	}
	return nil
}

// newKey makes an Ed25519 key pair named after the origin.
func newKey(origin string) (secret, public string, err error) {
	if err := checkOrigin(origin); err != nil {
		return "", "", err
	}
	return note.GenerateKey(rand.Reader, origin)
}

// writeNew writes a file that must not exist yet and makes it durable.
func writeNew(path, text string, mode os.FileMode) error {
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, mode)
	if err != nil {
		return err
	}
	_, err = f.WriteString(text)
	if err == nil {
		err = f.Sync()
	}
	if err := errors.Join(err, f.Close()); err != nil {
		return err
	}
	return syncFolder(path)
}

// readSigner reads the signing key and refuses a file that others may read.
func readSigner(path string) (signer, error) {
	info, err := os.Stat(path)
	if err != nil {
		return signer{}, keyTrouble(path, "cannot be read", err)
	}
	if runtime.GOOS != "windows" && info.Mode().Perm()&0o077 != 0 {
		return signer{}, &session.Fault{
			Code: "ledger-key-open", Message: fmt.Sprintf("The signing key %s can be read by others (mode %04o).", path, info.Mode().Perm()),
			Hint: "Run: chmod 600 " + path + " and consider whether the key was copied; if so, change it.",
		}
	}
	text, err := os.ReadFile(path)
	if err != nil {
		return signer{}, keyTrouble(path, "cannot be read", err)
	}
	secret := strings.TrimSpace(string(text))
	s, err := note.NewSigner(secret)
	if err != nil {
		return signer{}, keyTrouble(path, "is not a signing key", err)
	}
	public, err := publicOf(secret)
	if err != nil {
		return signer{}, keyTrouble(path, "is not a signing key", err)
	}
	return signer{Signer: s, public: public}, nil
}

func keyTrouble(path, what string, err error) error {
	return &session.Fault{
		Code: "ledger-key", Message: "The signing key " + path + " " + what + ".",
		Hint: "Put the ledger's own key file in place: it was made together with the ledger.", Err: err,
	}
}

// KeyChanged is the content of an event of kind KindKeyChanged. Statement is a signed
// note of the old key that names the new one.
type KeyChanged struct {
	Old       string `json:"old_key"`
	New       string `json:"new_key"`
	Reason    string `json:"reason"`
	Statement string `json:"statement"`
}

// Created is the content of event 0, of kind KindCreated.
type Created struct {
	Origin    string `json:"origin"`
	PublicKey string `json:"public_key"`
	Software  string `json:"software"`
}

// The two kinds of events that the ledger itself reads.
const (
	KindCreated    = "ledger.created"
	KindKeyChanged = "ledger.key-changed"
)

// keyring is the sequence of keys of one ledger: which one signs which sizes.
type keyring []keyAge

// keyAge says that key signs checkpoints of more than from events.
type keyAge struct {
	from int64
	key  string
}

func (k keyring) newest() string { return k[len(k)-1].key }

// at gives the position of the key that signs a checkpoint of the given size.
func (k keyring) at(size int64) int {
	for i := len(k) - 1; i > 0; i-- {
		if size > k[i].from {
			return i
		}
	}
	return 0
}

// position gives the place of a key in the sequence, -1 when it is not there.
func (k keyring) position(key string) int {
	for i := range k {
		if k[i].key == key {
			return i
		}
	}
	return -1
}

// begin reads the first key from event 0.
func begin(body []byte) (keyring, error) {
	h, err := ParseHeader(body)
	if err != nil || h.Kind != KindCreated {
		return nil, altered(0, "is not the founding of a ledger")
	}
	var c Created
	if err := fillInto(body, &c); err != nil {
		return nil, altered(0, "is not the founding of a ledger")
	}
	v, err := note.NewVerifier(c.PublicKey)
	if err != nil || v.Name() != c.Origin {
		return nil, altered(0, "names no usable public key")
	}
	return keyring{{0, c.PublicKey}}, nil
}

// change adds the key that the event at seq brings, when the old key vouches for it.
func (k keyring) change(seq int64, body []byte) (keyring, error) {
	var c KeyChanged
	if err := fillInto(body, &c); err != nil {
		return k, altered(seq, "is a key change that cannot be read")
	}
	said, err := ReadKeyStatement([]byte(c.Statement), k.newest())
	if err != nil || c.Old != k.newest() || said.New != c.New || said.Seq != seq {
		return k, altered(seq, "changes the key without the old key's signature")
	}
	return append(k[:len(k):len(k)], keyAge{seq, c.New}), nil
}

// KeyStatement is what the old key signs when it hands over.
type KeyStatement struct {
	Origin string
	Seq    int64  // number of the event that changes the key
	New    string // the new public key
}

// text gives the signed lines. The first one contains spaces, which an origin cannot,
// so a statement is never mistaken for a checkpoint.
func (k KeyStatement) text() string {
	return fmt.Sprintf("tenthmark key change\n%s\n%d\n%s\n", k.Origin, k.Seq, k.New)
}

// ReadKeyStatement reads a key change and checks the old key's signature.
func ReadKeyStatement(signed []byte, oldKey string) (KeyStatement, error) {
	text, err := openNote(signed, oldKey)
	if err != nil {
		return KeyStatement{}, err
	}
	lines := strings.Split(text, "\n")
	if len(lines) != 5 {
		return KeyStatement{}, errors.New("key change: malformed")
	}
	k := KeyStatement{Origin: lines[1], New: lines[3]}
	if k.Seq, err = parseSize(lines[2]); err != nil {
		return KeyStatement{}, err
	}
	v, err := note.NewVerifier(k.New)
	if err != nil || v.Name() != k.Origin || k.text() != text || !strings.HasPrefix(oldKey, k.Origin+"+") {
		return KeyStatement{}, errors.New("key change: malformed")
	}
	return k, nil
}

// publicOf derives the public form from a secret key line
// PRIVATE+KEY+name+hash+base64(algorithm byte, 32-byte seed).
func publicOf(secret string) (string, error) {
	parts := strings.Split(secret, "+")
	if len(parts) < 5 {
		return "", errors.New("malformed key")
	}
	raw, err := base64.StdEncoding.DecodeString(strings.Join(parts[4:], "+"))
	if err != nil || len(raw) != 1+ed25519.SeedSize {
		return "", errors.New("malformed key")
	}
	private := ed25519.NewKeyFromSeed(raw[1:])
	return note.NewEd25519VerifierKey(parts[2], private.Public().(ed25519.PublicKey))
}

// ReadPublicKey gives the public key in a file made by Create: one line.
func ReadPublicKey(path string) (string, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return "", keyTrouble(path, "cannot be read", err)
	}
	key := strings.TrimSpace(string(text))
	if _, err := note.NewVerifier(key); err != nil {
		return "", keyTrouble(path, "is not a public key of a ledger", err)
	}
	return key, nil
}

// NamedKey gives the public key that an event brings: the founding's or a key change's,
// "" for every other event.
func NamedKey(e Entry) (string, error) {
	h, err := parseRaw(e.Body)
	if err != nil {
		return "", err
	}
	switch string(h.kind) {
	case KindCreated:
		var c Created
		err = fillInto(e.Body, &c)
		return c.PublicKey, err
	case KindKeyChanged:
		var c KeyChanged
		err = fillInto(e.Body, &c)
		return c.New, err
	}
	return "", nil
}
