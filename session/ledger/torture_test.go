package ledger

import (
	"bufio"
	"cmp"
	"context"
	"crypto/sha256"
	"encoding/hex"
	"flag"
	"fmt"
	"io"
	"math/rand/v2"
	"os"
	"os/exec"
	"path/filepath"
	"regexp"
	"strconv"
	"strings"
	"testing"
	"time"
)

var tortureKills = flag.Int("torture.kills", 30, "how often the torture test kills the writer")

// victimEnv makes the test binary the writer that the torture test kills.
const victimEnv = "TENTHMARK_LEDGER_VICTIM"

func TestMain(m *testing.M) {
	if path := os.Getenv(victimEnv); path != "" {
		if err := victim(path); err != nil {
			fmt.Fprintln(os.Stderr, err)
			os.Exit(1)
		}
		os.Exit(0)
	}
	os.Exit(m.Run())
}

// victimLimit makes the writer stop by itself after so many appends.
const victimLimit = "TENTHMARK_LEDGER_APPENDS"

// victim appends without end and says for each event, after Append has returned, number
// and hash on standard output. Now and then it signs, saves a snapshot or indexes.
func victim(path string) error {
	ctx := context.Background()
	l, err := Open(ctx, Options{Path: path, KeyFile: keyBeside(path)})
	if err != nil {
		return err
	}
	fmt.Println("open")
	limit, err := strconv.ParseInt(cmp.Or(os.Getenv(victimLimit), "-1"), 10, 64)
	if err != nil {
		return err
	}
	for n := int64(0); n != limit; n++ {
		drafts := plains(1 + rand.IntN(3))
		entries, err := l.Append(ctx, drafts...)
		if err != nil {
			return err
		}
		for _, e := range entries {
			fmt.Printf("%d %s\n", e.Seq, bodySum(e.Body))
		}
		if err := chore(ctx, l, n); err != nil {
			return err
		}
	}
	return l.Close()
}

func chore(ctx context.Context, l *Ledger, n int64) error {
	switch n % 25 {
	case 7:
		_, err := l.Checkpoint(ctx)
		return err
	case 18:
		return l.SaveSnapshot(ctx, Snapshot{Size: l.Size(), State: fmt.Appendf(nil, "state %d", l.Size())})
	}
	return nil
}

func keyBeside(path string) string { return strings.TrimSuffix(path, ".db") + ".key" }

func bodySum(body []byte) string {
	sum := sha256.Sum256(body)
	return hex.EncodeToString(sum[:])
}

// TestTorture kills the writer at random moments under load. After each kill it opens the
// ledger and verifies it: every acknowledged event is there with its bytes, no number is
// missing and none is there twice, and what was there before is still there.
func TestTorture(t *testing.T) {
	t.Parallel()
	var opt Options
	var acked map[int64]string
	total, unacked := 0, int64(0)
	for kill := range *tortureKills {
		if kill%200 == 0 { // a fresh ledger now and then, so that a long form stays quick
			opt, acked = found(t, t.TempDir()), map[int64]string{}
		}
		said := strike(t, opt.Path)
		for seq, sum := range said {
			if acked[seq] != "" {
				t.Fatalf("kill %d: number %d was given twice", kill, seq)
			}
			acked[seq] = sum
		}
		total += len(said)
		unacked += inspect(t, opt, acked)
	}
	t.Logf("%d kills, %d events acknowledged and all there; %d were saved without an answer", *tortureKills, total, unacked)
	if total == 0 {
		t.Error("nothing was ever acknowledged: the test does not test")
	}
}

// strike starts a writer, kills it after a moment and gives what it acknowledged.
func strike(t *testing.T, path string) map[int64]string {
	t.Helper()
	cmd := exec.Command(os.Args[0])
	cmd.Env = append(os.Environ(), victimEnv+"="+path)
	var complaint strings.Builder
	cmd.Stderr = &complaint
	out, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	timer := time.AfterFunc(time.Duration(rand.IntN(90_000))*time.Microsecond, func() { _ = cmd.Process.Kill() })
	said := listen(t, out)
	_ = cmd.Wait() // it was killed: the error says just that
	timer.Stop()
	if complaint.Len() > 0 {
		t.Fatalf("the writer failed by itself: %s", complaint.String())
	}
	return said
}

// listen reads whole lines; a line that the kill cut off was not said.
func listen(t *testing.T, out io.Reader) map[int64]string {
	t.Helper()
	said := map[int64]string{}
	in := bufio.NewReader(out)
	for {
		text, err := in.ReadString('\n')
		if err != nil {
			return said
		}
		var seq int64
		var sum string
		if n, _ := fmt.Sscanf(text, "%d %s", &seq, &sum); n == 2 {
			said[seq] = sum
		}
	}
}

// inspect verifies what the kill left and gives the number of events without an answer,
// which it adds to acked: from now on they have to stay.
func inspect(t *testing.T, opt Options, acked map[int64]string) (unacked int64) {
	t.Helper()
	r, err := Verify(t.Context(), opt.Path, VerifyOptions{Event: func(e Entry) error {
		sum := bodySum(e.Body)
		switch want, known := acked[e.Seq]; {
		case !known:
			acked[e.Seq] = sum
			unacked++
		case want != sum:
			return fmt.Errorf("hash %s, acknowledged was %s", sum, want)
		}
		return nil
	}})
	if err != nil {
		t.Fatal(err)
	}
	if !r.OK() {
		t.Fatalf("after the kill: %v", r.First())
	}
	for seq := range acked {
		if seq >= r.Events {
			t.Fatalf("event %d was acknowledged and is gone; the ledger has %d", seq, r.Events)
		}
	}
	return unacked
}

// TestOneSyncPerCommit counts with strace that every acknowledged append waited for the
// disk at least once.
func TestOneSyncPerCommit(t *testing.T) {
	needs(t, "strace")
	opt := found(t, t.TempDir())
	count := filepath.Join(t.TempDir(), "count")
	cmd := exec.Command("strace", "-f", "-c", "-e", "trace=fsync,fdatasync", "-o", count, os.Args[0])
	cmd.Env = append(os.Environ(), victimEnv+"="+opt.Path, victimLimit+"=200")
	if out, err := cmd.CombinedOutput(); err != nil {
		t.Skipf("strace does not work here: %v\n%s", err, out)
	}
	text, err := os.ReadFile(count)
	if err != nil {
		t.Fatal(err)
	}
	total := regexp.MustCompile(`(?m)^\s*100\.00\s+\S+\s+\d+\s+(\d+)\s.*total$`).FindSubmatch(text)
	if total == nil {
		t.Fatalf("no total in:\n%s", text)
	}
	syncs, err := strconv.Atoi(string(total[1]))
	if err != nil || syncs < 200 {
		t.Errorf("%d syncs for 200 appends (%v)", syncs, err)
	}
	t.Logf("%d syncs for 200 appends, 8 checkpoints and 7 or 8 snapshots", syncs)
}
