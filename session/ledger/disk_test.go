package ledger

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"os/exec"
	"path/filepath"
	"runtime"
	"strings"
	"testing"

	"tenthmark/session"
)

// TestDiskFull fills a small disk with events until it is full: a clear message, nothing
// half written, and work goes on when there is space again.
func TestDiskFull(t *testing.T) {
	dir := smallDisk(t, "2m")
	opt := found(t, dir)
	l := open(t, opt)
	var err error
	for err == nil {
		_, err = l.Append(t.Context(), plains(20)...)
	}
	wantCode(t, err, "disk-full")
	size := l.Size()
	if size < 100 || (size-1)%20 != 0 {
		t.Errorf("size %d: half of an append is there", size)
	}
	if _, err := l.Append(t.Context(), plain); err == nil {
		t.Log("a single event still fitted")
		size++
	}
	makeSpace(t, dir)
	mustAppend(t, l, plains(5)...)
	mustClose(t, l)
	verifyGood(t, opt, size+5)
}

// smallDisk mounts a small memory disk with a file that takes a quarter of it.
func smallDisk(t *testing.T, size string) string {
	t.Helper()
	if runtime.GOOS != "linux" || os.Geteuid() != 0 {
		t.Skip("needs the right to mount a small disk")
	}
	dir := t.TempDir()
	if out, err := exec.Command("mount", "-t", "tmpfs", "-o", "size="+size, "tmpfs", dir).CombinedOutput(); err != nil {
		t.Skipf("cannot mount a small disk: %s", out)
	}
	t.Cleanup(func() {
		if out, err := exec.Command("umount", dir).CombinedOutput(); err != nil {
			t.Errorf("umount: %s", out)
		}
	})
	if err := os.WriteFile(filepath.Join(dir, "ballast"), make([]byte, 512<<10), 0o600); err != nil {
		t.Fatal(err)
	}
	return dir
}

func makeSpace(t *testing.T, dir string) {
	t.Helper()
	if err := os.Remove(filepath.Join(dir, "ballast")); err != nil {
		t.Fatal(err)
	}
}

// TestReadOnlyDisk lets the system make the disk read-only under the daemon.
func TestReadOnlyDisk(t *testing.T) {
	dir := smallDisk(t, "8m")
	opt := found(t, dir)
	l, err := Open(t.Context(), opt)
	if err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(10)...)
	if _, err := l.Checkpoint(t.Context()); err != nil {
		t.Fatal(err)
	}
	mustClose(t, l)
	remount(t, dir, "ro")
	_, err = Open(t.Context(), opt)
	if err == nil {
		t.Fatal("opened for writing on a read-only disk")
	}
	if f := (*session.Fault)(nil); !errors.As(err, &f) || f.Hint == "" {
		t.Errorf("error %v, want a fault with a hint", err)
	}
	r, err := Verify(t.Context(), opt.Path, VerifyOptions{})
	if err != nil || !r.OK() || r.Events != 11 {
		t.Errorf("reading on a read-only disk: %d events (%v) %v", r.Events, err, r.First())
	}
	remount(t, dir, "rw")
	l = open(t, opt)
	mustAppend(t, l, plain)
}

func remount(t *testing.T, dir, how string) {
	t.Helper()
	if out, err := exec.Command("mount", "-o", "remount,"+how, dir).CombinedOutput(); err != nil {
		t.Skipf("cannot remount: %s", out)
	}
}

// TestSecondDaemon lets another process try to open the ledger, also after this process has
// opened and closed the ledger's own files, which drops ordinary POSIX locks.
func TestSecondDaemon(t *testing.T) {
	t.Parallel()
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plain)
	if said := otherProcess(t, opt.Path); !strings.Contains(said, "ledger-in-use") {
		t.Errorf("the second daemon said %q", said)
	}
	for _, name := range []string{opt.Path, opt.Path + "-wal"} {
		f, err := os.Open(name)
		if err != nil {
			t.Fatal(err)
		}
		mustClose(t, f)
	}
	if err := os.Remove(opt.Path + ".lock"); err != nil { // as a careless cleaner does
		t.Fatal(err)
	}
	if said := otherProcess(t, opt.Path); !strings.Contains(said, "ledger-in-use") {
		t.Errorf("without the lock file the second daemon said %q", said)
	}
	mustAppend(t, l, plain)
	if _, err := os.Stat(opt.Path + "-shm"); !errors.Is(err, os.ErrNotExist) {
		t.Errorf("a shared-memory file is there (%v): its locks would be lost", err)
	}
}

// otherProcess starts the test binary as a second writer and gives its complaint.
func otherProcess(t *testing.T, path string) string {
	t.Helper()
	ctx, cancel := context.WithCancel(t.Context())
	defer cancel()
	cmd := exec.CommandContext(ctx, os.Args[0])
	cmd.Env = append(os.Environ(), victimEnv+"="+path)
	stderr, err := cmd.StderrPipe()
	if err != nil {
		t.Fatal(err)
	}
	stdout, err := cmd.StdoutPipe()
	if err != nil {
		t.Fatal(err)
	}
	if err := cmd.Start(); err != nil {
		t.Fatal(err)
	}
	if text, _ := bufio.NewReader(stdout).ReadString('\n'); text != "" {
		cancel()
		t.Errorf("a second daemon opened the ledger: %s", text)
	}
	said, err := io.ReadAll(stderr)
	if err != nil {
		t.Fatal(err)
	}
	_ = cmd.Wait() // it ends with an exit code: that is what it is asked for
	return string(said)
}

// TestDamagedPage spoils pages of the file while no daemon runs.
func TestDamagedPage(t *testing.T) {
	s := makeSample(t, 300)
	info, err := os.Stat(s.path)
	if err != nil {
		t.Fatal(err)
	}
	for page := int64(0); page < info.Size()/4096; page += 7 {
		t.Run(fmt.Sprintf("page %d", page+1), func(t *testing.T) {
			c := s.copy(t)
			overwrite(t, c.path, page*4096+100, strings.Repeat("\xa5", 600))
			r, err := Verify(t.Context(), c.path, VerifyOptions{PublicKey: c.key, Checkpoints: [][]byte{c.checkpoint}})
			if err == nil && r.OK() {
				t.Error("not found")
			}
		})
	}
}

// TestHotLog reads and verifies a ledger whose writer was killed: the newest events are
// still in the write-ahead log.
func TestHotLog(t *testing.T) {
	opt := found(t, t.TempDir())
	l := open(t, opt)
	mustAppend(t, l, plains(50)...)
	dir := t.TempDir() // what a killed writer leaves: the files as they stand
	left := Options{Path: filepath.Join(dir, "ledger.db"), KeyFile: opt.KeyFile}
	copyFile(t, opt.Path, left.Path)
	copyFile(t, opt.Path+"-wal", left.Path+"-wal")
	r, err := Verify(t.Context(), left.Path, VerifyOptions{})
	if err != nil || !r.OK() || r.Events != 51 {
		t.Fatalf("%d events (%v) %v", r.Events, err, r.First())
	}
	l2 := open(t, left)
	if l2.Size() != 51 {
		t.Errorf("reopened with %d events, want 51", l2.Size())
	}
	mustAppend(t, l2, plain)
}

// TestPageBreaksUnderTheDaemon spoils a page of the file while the daemon has it open. What
// was saved before and lies elsewhere stays readable, and nothing is taken any more.
func TestPageBreaksUnderTheDaemon(t *testing.T) {
	opt := found(t, t.TempDir())
	l, err := Open(t.Context(), opt)
	if err != nil {
		t.Fatal(err)
	}
	mustAppend(t, l, plains(200)...)
	if err := l.enter(t.Context()); err != nil {
		t.Fatal(err)
	}
	if err := l.fold(t.Context()); err != nil { // so that the newest pages are in the file
		t.Fatal(err)
	}
	l.leave()
	mustClose(t, l)
	l = open(t, opt)
	info, err := os.Stat(opt.Path)
	if err != nil {
		t.Fatal(err)
	}
	for at := int64(4096); at < info.Size(); at += 4096 {
		overwrite(t, opt.Path, at, strings.Repeat("\xa5", 64))
	}
	if err := l.enter(t.Context()); err != nil {
		t.Fatal(err)
	}
	_, err = l.db.ExecContext(t.Context(), `PRAGMA shrink_memory`) // forget the good pages
	l.leave()
	if err != nil {
		t.Fatal(err)
	}
	for range 3 {
		_, err = l.Append(t.Context(), plain)
		if f := (*session.Fault)(nil); !errors.As(err, &f) || f.Hint == "" {
			t.Fatalf("append: %v, want a fault with a hint", err)
		}
	}
	r, err := Verify(t.Context(), copyOf(t, opt.Path), VerifyOptions{})
	if err != nil || r.OK() {
		t.Errorf("verify: %v, want findings", err)
	}
}

func copyOf(t *testing.T, path string) string {
	t.Helper()
	to := filepath.Join(t.TempDir(), "copy.db")
	copyFile(t, path, to)
	return to
}
