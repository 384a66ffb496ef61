//go:build linux

package acquire

import (
	"bufio"
	"fmt"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"
)

// A balance written in another language, with its own noise and bad habits, drives a
// station through a pseudo-terminal and through TCP. What is taken must be exactly
// what it says a patient person would have written down.
func TestForeignBalance(t *testing.T) {
	t.Parallel()
	python, err := exec.LookPath("python3")
	if err != nil {
		t.Skip("python3 is not installed; the balance in another language needs it")
	}
	for _, line := range []string{"pty", "tcp"} {
		t.Run(line, func(t *testing.T) {
			t.Parallel()
			args := []string{filepath.Join("..", "testdata", "acquire", "balance.py"), line}
			if line == "pty" {
				args = append(args, filepath.Join(t.TempDir(), "balance0"))
			}
			cmd := exec.CommandContext(t.Context(), python, append(args, "7")...)
			cmd.Stderr = os.Stderr
			in, err := cmd.StdinPipe()
			if err != nil {
				t.Fatal(err)
			}
			out, err := cmd.StdoutPipe()
			if err != nil {
				t.Fatal(err)
			}
			if err := cmd.Start(); err != nil {
				t.Fatal(err)
			}
			defer cmd.Wait() //nolint:errcheck // it ends when its input does
			defer in.Close()
			weighWith(t, line, bufio.NewScanner(out))
		})
	}
}

// weighWith plays the session of a foreign balance.
func weighWith(t *testing.T, line string, says *bufio.Scanner) {
	sink := newBench()
	var s *Station
	var want, got []string
	for says.Scan() {
		word, rest, _ := strings.Cut(says.Text(), " ")
		switch word {
		case "port":
			cfg := fast(rest)
			cfg.ListenS, cfg.ReplyS, cfg.DwellS = number("0.2"), number("0.3"), number("0.1")
			if line == "tcp" {
				cfg.Port, cfg.TCP = "", rest
			}
			s = start(t, cfg, Options{Sink: sink})
		case "expect":
			want = append(want, rest)
		case "tare":
			if err := s.Tare(t.Context()); err != nil {
				t.Error(err)
			}
		}
		if word == "done" {
			break
		}
	}
	for range want {
		got = append(got, next(t, "a weight", sink.weights).MassG.String())
		if got[len(got)-1] != want[len(got)-1] {
			break
		}
	}
	for len(sink.weights) > 0 {
		got = append(got, (<-sink.weights).MassG.String())
	}
	if fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("taken\n%v\nwant\n%v", got, want)
	}
	if len(want) < 20 {
		t.Errorf("the session had only %d weights", len(want))
	}
	if id := <-sink.online; id.Serial != "001,234,567" || id.Model != "PY-220" {
		t.Errorf("identity %+v", id)
	}
}
