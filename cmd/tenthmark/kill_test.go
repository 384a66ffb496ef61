package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"net"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"testing"

	"tenthmark/session"
)

// process is the daemon as a process of its own.
type process struct {
	t      *testing.T
	config string
	cmd    *exec.Cmd
	errors *bytes.Buffer
}

// start runs the daemon and waits until it is at work.
func (p *process) start() {
	p.t.Helper()
	p.cmd = exec.Command(os.Args[0], "serve", "-c", p.config)
	p.cmd.Env = append(os.Environ(), asProgram+"=1")
	p.errors = &bytes.Buffer{}
	p.cmd.Stderr = p.errors
	out, err := p.cmd.StdoutPipe()
	if err != nil {
		p.t.Fatal(err)
	}
	if err := p.cmd.Start(); err != nil {
		p.t.Fatal(err)
	}
	line, err := bufio.NewReader(out).ReadString('\n')
	if err != nil || !strings.Contains(line, "is at work") {
		p.t.Fatalf("the daemon says %q, %v\n%s", line, err, p.errors)
	}
}

// kill ends it as a power failure would.
func (p *process) kill() {
	p.t.Helper()
	if err := p.cmd.Process.Kill(); err != nil {
		p.t.Fatal(err)
	}
	_ = p.cmd.Wait() // it was killed, and says so
}

// freeAddress gives an address that nobody listens on at the moment.
func freeAddress(t *testing.T) string {
	t.Helper()
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// calibrateInTest lets the demo's operator work on a daemon of its own process.
// afterEach, if given, is called after every step of the operator.
func calibrateInTest(t *testing.T, seed uint64, afterEach func(p *process, s *stage)) session.Document {
	t.Helper()
	address := freeAddress(t)
	s, err := newStageAt(t.Context(), demoOptions{seed: seed, out: t.TempDir(), pace: 100}, address)
	if err != nil {
		t.Fatal(err)
	}
	ctx, cancel := context.WithCancel(t.Context())
	served := make(chan error, 1)
	go func() { served <- ignoreCancel(s.balance.Serve(ctx, s.pty)) }()
	defer func() {
		cancel()
		if err := <-served; err != nil {
			t.Error(err)
		}
	}()
	p := &process{t: t, config: filepath.Join(s.folder, "config.toml")}
	p.start()
	defer p.kill()
	var said bytes.Buffer
	operator := s.operator("http://"+address, stdio{out: &said})
	if afterEach != nil {
		operator.afterStep = func() { afterEach(p, s) }
	}
	if err := operator.register(ctx); err != nil {
		t.Fatal(err)
	}
	if err := operator.calibrate(ctx, demoRun()); err != nil {
		t.Fatalf("%v\n%s\n%s", err, &said, p.errors)
	}
	text, err := os.ReadFile(filepath.Join(s.config.Publish.Folder, operator.run, "run.json"))
	if err != nil {
		t.Fatal(err)
	}
	var doc session.Document
	if err := json.Unmarshal(text, &doc); err != nil {
		t.Fatal(err)
	}
	return doc
}

// facts keeps of a document what must not depend on how often the daemon was killed.
func facts(t *testing.T, doc session.Document) string {
	t.Helper()
	type delivery struct {
		Void                      bool
		Before, After, Start, End string
		Water                     string
		Volume20ML, CorrectionML  float64
	}
	var all []delivery
	for _, d := range doc.Deliveries {
		one := delivery{Void: d.Void}
		if d.Before != nil && d.After != nil && d.Start != nil && d.End != nil && d.Water != nil && d.DocumentNumbers != nil {
			one.Before, one.After, one.Start, one.End = d.Before.MassG.String(), d.After.MassG.String(), d.Start.ReadingML.String(), d.End.ReadingML.String()
			one.Water, one.Volume20ML, one.CorrectionML = d.Water.WaterTempC.String(), d.Volume20ML, d.CorrectionML
		}
		all = append(all, one)
	}
	b, err := json.Marshal(map[string]any{"deliveries": all, "curve": doc.Curve.Points, "conformity": doc.Conformity})
	if err != nil {
		t.Fatal(err)
	}
	return string(b)
}

// The daemon is killed with SIGKILL after every step that the operator takes and
// started again. Every acknowledged fact is there, the run goes on, and the result is
// that of a run without a kill.
func TestKilledAtEveryStepTheResultIsTheSame(t *testing.T) {
	if testing.Short() {
		t.Skip("starts the daemon some sixty times")
	}
	want := facts(t, calibrateInTest(t, 5, nil))
	kills := 0
	got := facts(t, calibrateInTest(t, 5, func(p *process, s *stage) {
		p.kill()
		kills++
		if err := s.pty.Unlock(); err != nil { // a killed client leaves the terminal locked
			t.Error(err)
		}
		p.start()
	}))
	if got != want {
		t.Errorf("after %d kills the result differs:\n%s\nwant\n%s", kills, got, want)
	}
	if kills < 40 {
		t.Errorf("only %d kills: the test does not reach every step", kills)
	}
}
