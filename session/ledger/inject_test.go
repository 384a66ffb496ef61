package ledger

import (
	"bytes"
	"fmt"
	"os"
	"os/exec"
	"strings"
	"testing"
)

// TestSystemCallsFail lets single system calls of the writer fail, one run for each: the
// n-th write, sync or cut of a file, with an input/output error or a full disk. Whatever
// the writer makes of it, every event it acknowledged is there afterwards, and the ledger
// is whole.
func TestSystemCallsFail(t *testing.T) {
	t.Parallel()
	needs(t, "strace")
	last, stride := 45, 6
	if *longForms {
		last, stride = 120, 1
	}
	runs, refused := 0, 0
	for _, call := range []string{"fsync", "pwrite64", "ftruncate"} {
		for _, cause := range []string{"EIO", "ENOSPC"} {
			for n := 1; n <= last; n += stride {
				said, complaint := writeWithFault(t, fmt.Sprintf("inject=%s:error=%s:when=%d", call, cause, n))
				runs++
				if complaint != "" {
					refused++
				}
				if t.Failed() {
					t.Fatalf("after %s number %d failed with %s (%d events acknowledged): %s", call, n, cause, said, complaint)
				}
			}
		}
	}
	t.Logf("%d runs, each with one system call that failed; %d times the writer stopped with a message", runs, refused)
	if refused == 0 {
		t.Error("no fault ever reached the writer: the test does not test")
	}
}

// writeWithFault runs a writer of 20 appends under strace with the fault and verifies what
// it leaves. It gives the number of acknowledged events and the writer's complaint.
func writeWithFault(t *testing.T, fault string) (acked int, complaint string) {
	t.Helper()
	opt := found(t, t.TempDir())
	cmd := exec.Command("strace", "-f", "-qq", "-o", os.DevNull, "-e", "trace=fsync,pwrite64,ftruncate", "-e", fault, os.Args[0])
	cmd.Env = append(os.Environ(), victimEnv+"="+opt.Path, victimLimit+"=20")
	var out, said bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &said
	if err := cmd.Run(); err != nil && strings.Contains(said.String(), "strace:") {
		t.Skipf("strace does not work here: %s", said.String())
	}
	events := listen(t, &out)
	inspect(t, opt, events)
	l, err := Open(t.Context(), opt)
	if err != nil {
		t.Errorf("open afterwards: %v", err)
		return len(events), said.String()
	}
	mustAppend(t, l, plain)
	mustClose(t, l)
	return len(events), said.String()
}
