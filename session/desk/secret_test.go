package desk

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"tenthmark/session"
)

var cheap = Cost{Passes: 1, MemoryKiB: 64, Lanes: 1}

func secretsAt(t *testing.T, path string) *Secrets {
	t.Helper()
	s, err := OpenSecrets(path, cheap)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

func TestSecretsSurviveARestartAndAreNotReadable(t *testing.T) {
	path := filepath.Join(t.TempDir(), "ledger.db.secrets")
	binding, err := secretsAt(t, path).Keep("correct horse battery")
	if err != nil {
		t.Fatal(err)
	}
	info, err := os.Stat(path)
	if err != nil || info.Mode().Perm() != 0o600 {
		t.Errorf("the file is there: %v, mode %v", err, info.Mode())
	}
	text, err := os.ReadFile(path)
	if err != nil || strings.Contains(string(text), "horse") {
		t.Errorf("the file holds the secret itself (%v)", err)
	}
	again := secretsAt(t, path)
	for secret, want := range map[string]bool{"correct horse battery": true, "correct horse batterz": false, "": false, strings.Repeat("x", 300): false} {
		if got, err := again.Matches(binding, secret); got != want || err != nil {
			t.Errorf("%q matches: %v, %v", secret, got, err)
		}
	}
	if got, err := again.Matches("", "anything at all"); got || err != nil {
		t.Errorf("somebody without a secret: %v, %v", got, err)
	}
}

// The ledger's event says which hash counts: one that was put into the file by hand does
// not, even where it is a good one.
func TestAHashThatWasExchangedDoesNotCount(t *testing.T) {
	path := filepath.Join(t.TempDir(), "secrets")
	s := secretsAt(t, path)
	mine, err := s.Keep("the first secret")
	if err != nil {
		t.Fatal(err)
	}
	other, err := s.Keep("the intruder's one")
	if err != nil {
		t.Fatal(err)
	}
	s.hashes[mine] = s.hashes[other]
	if got, err := s.Matches(mine, "the intruder's one"); got || session.FaultCode(err) != "secret-altered" {
		t.Errorf("an exchanged hash: %v, %v", got, err)
	}
	delete(s.hashes, mine)
	if got, err := s.Matches(mine, "the first secret"); got || session.FaultCode(err) != "secret-altered" {
		t.Errorf("a removed hash: %v, %v", got, err)
	}
}

func TestSecretsThatAreTooShortOrTooLong(t *testing.T) {
	s := secretsAt(t, filepath.Join(t.TempDir(), "secrets"))
	for _, secret := range []string{"", "short", strings.Repeat("x", LongestSecret+1)} {
		if _, err := s.Keep(secret); session.FaultCode(err) != "bad-secret" {
			t.Errorf("a secret of %d bytes: %v", len(secret), err)
		}
	}
}

func TestAFileOfSecretsThatCannotBeUsed(t *testing.T) {
	folder := t.TempDir()
	path := filepath.Join(folder, "secrets")
	if err := os.WriteFile(path, []byte("{not json"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := OpenSecrets(path, cheap); session.FaultCode(err) != "secrets-unreadable" {
		t.Errorf("a damaged file: %v", err)
	}
	s := secretsAt(t, filepath.Join(folder, "gone", "secrets"))
	if _, err := s.Keep("long enough, surely"); session.FaultCode(err) != "secrets-not-written" || len(s.hashes) != 0 {
		t.Errorf("a folder that is not there: %v, %d hashes kept", err, len(s.hashes))
	}
}

// A vector of the reference implementation of Argon2 (P-H-C/phc-winner-argon2, src/test.c,
// version 0x13, argon2id; from memory), in the form that is stored.
func TestHashesAreThoseOfTheReferenceImplementation(t *testing.T) {
	s := secretsAt(t, filepath.Join(t.TempDir(), "secrets"))
	got := s.encode("password", []byte("somesalt"), Cost{Passes: 2, MemoryKiB: 65536, Lanes: 1})
	if want := "$argon2id$v=19$m=65536,t=2,p=1$c29tZXNhbHQ$CTFhFdXPJO1aFaMaO6Mm5c8y7cJHAph8ArZWb2GRPPc"; got != want {
		t.Errorf("got  %s\nwant %s", got, want)
	}
}

func TestTheStoredFormIsReadBack(t *testing.T) {
	s := secretsAt(t, filepath.Join(t.TempDir(), "secrets"))
	salt := []byte("0123456789abcdef")
	back, c, err := decode(s.encode("secret words", salt, FullCost))
	if err != nil || string(back) != string(salt) || c != FullCost {
		t.Errorf("read back: salt %q, cost %+v, %v", back, c, err)
	}
	for _, bad := range []string{"", "$argon2i$v=19$m=1,t=1,p=1$a$b", "$argon2id$v=16$m=64,t=1,p=1$MDEyMzQ1Njc4OWFiY2RlZg$x", "$argon2id$v=19$m=64,t=1,p=1$short"} {
		if _, _, err := decode(bad); err == nil {
			t.Errorf("decoded %q", bad)
		}
	}
}

func TestTheFirstAdministrator(t *testing.T) {
	d := startDesk(t, &memory{}, testClock())
	s := secretsAt(t, filepath.Join(t.TempDir(), "secrets"))
	head := session.Person{Name: "head", PrintedName: "The Head"}
	if err := d.EnrolFirst(t.Context(), s, head, "short"); session.FaultCode(err) != "bad-secret" {
		t.Errorf("a short secret: %v", err)
	}
	if err := d.EnrolFirst(t.Context(), s, head, "long enough, surely"); err != nil {
		t.Fatal(err)
	}
	err := d.View(t.Context(), func(b *session.Book) error {
		m, err := b.Member("head")
		if err != nil {
			return err
		}
		right, err := s.Matches(m.SecretSHA256, "long enough, surely")
		if !right || !session.Allows(m.Duties, session.ActPeople) {
			t.Errorf("the administrator %+v, secret matches %v", m, right)
		}
		return err
	})
	if err != nil {
		t.Error(err)
	}
	if err := d.EnrolFirst(t.Context(), s, session.Person{Name: "other", PrintedName: "O"}, "long enough, surely"); session.FaultCode(err) != "people-exist" {
		t.Errorf("a second one: %v", err)
	}
}
