package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"time"

	"github.com/rs/zerolog"

	"tenthmark/acquire/virtual"
	"tenthmark/calc"
	"tenthmark/session"
)

// demoOptions is what may be asked of a demo.
type demoOptions struct {
	seed  uint64
	out   string
	pace  float64
	serve bool
}

// demoAir is the weather in the demo's balance room.
var demoAir = calc.Ambient{AirTempC: 21.3, PressureHPa: 1004.2, HumidityPct: 45}

func runDemo(ctx context.Context, args []string, io stdio) int {
	f := newFlags("demo", "Runs a whole calibration: the real daemon on a pseudo-terminal, with a virtual balance,\nburette and operator. The laboratory of a drinking-water works checks the burette it\nuses for total hardness.", io.err)
	var opt demoOptions
	f.Uint64Var(&opt.seed, "seed", 1, "of everything that chance decides")
	f.StringVar(&opt.out, "out", "", "`folder` for ledger and drop; default: a new one")
	f.Float64Var(&opt.pace, "pace", 40, "how much faster than the clock the virtual world runs")
	f.BoolVar(&opt.serve, "serve", false, "keep the daemon up afterwards, so that the page can be opened")
	if code, done := parse(f, args); done {
		return code
	}
	if f.NArg() > 0 {
		fmt.Fprintf(io.err, "tenthmark demo takes flags only; %q is none.\n", f.Arg(0))
		return exitUsage
	}
	if opt.pace < 0.1 || opt.pace > 100 {
		fmt.Fprintln(io.err, "tenthmark demo: --pace is 0.1 to 100.")
		return exitUsage
	}
	if err := demo(ctx, opt, io); err != nil {
		return complain(io.err, err)
	}
	return exitDone
}

// demo sets the stage, lets the operator work, and shows what came out.
func demo(ctx context.Context, opt demoOptions, io stdio) error {
	stage, err := newStage(ctx, opt)
	if err != nil {
		return err
	}
	ctx, cancel := context.WithCancel(ctx)
	defer cancel()
	working := make(chan error, 2)
	go func() { working <- ignoreCancel(stage.balance.Serve(ctx, stage.pty)) }()
	go func() { working <- stage.daemon.Run(ctx) }()
	err = stage.play(ctx, io)
	if err == nil && opt.serve {
		fmt.Fprintf(io.out, "\nThe daemon stays up; open %s and stop with Ctrl-C.\n", stage.daemon.Address())
		<-ctx.Done()
	}
	cancel()
	return errors.Join(err, <-working, <-working)
}

func ignoreCancel(err error) error {
	if errors.Is(err, context.Canceled) {
		return nil
	}
	return err
}

// stage is everything a demo needs.
type stage struct {
	opt     demoOptions
	folder  string
	config  *config
	daemon  *daemon
	balance *virtual.Balance
	pty     *virtual.PTY
	bench   *demoBench
}

// newStage sets everything up, the daemon included.
func newStage(ctx context.Context, opt demoOptions) (*stage, error) {
	s, err := newStageAt(ctx, opt, "127.0.0.1:0")
	if err != nil {
		return nil, err
	}
	s.daemon, err = newDaemon(ctx, s.config, newLog(os.Stderr).Level(zerolog.WarnLevel))
	return s, err
}

// newStageAt sets up everything but the daemon, whose page is going to be at listen.
func newStageAt(ctx context.Context, opt demoOptions, listen string) (*stage, error) {
	s := &stage{opt: opt, folder: opt.out}
	var err error
	if s.folder == "" {
		s.folder, err = os.MkdirTemp("", "tenthmark-demo-")
	} else {
		err = os.MkdirAll(s.folder, 0o755)
	}
	if err != nil {
		return nil, fmt.Errorf("demo folder: %w", err)
	}
	if _, err := os.Stat(filepath.Join(s.folder, "ledger.db")); err == nil {
		return nil, session.Refuse("folder-taken", "The folder "+s.folder+" holds a ledger already.", "Name a new folder with --out, or leave --out away.")
	}
	if s.balance, err = virtual.New(virtual.Options{Seed: opt.seed, Pace: opt.pace}); err != nil {
		return nil, err
	}
	if s.pty, err = virtual.OpenPTY(); err != nil {
		return nil, err
	}
	if s.config, err = s.writeConfig(listen); err != nil {
		return nil, err
	}
	if err := createLedger(ctx, s.config, time.Now()); err != nil {
		return nil, err
	}
	s.bench = newDemoBench(opt.seed, s.balance, s.config.setting("bench-1").Inputs, demoAir)
	return s, nil
}

// demoConfig is the configuration of the demo's laboratory. The dwell is as much
// shorter as the virtual world is faster.
const demoConfig = `[ledger]
path = "ledger.db"
origin = "demo.waterworks.example"

[publish]
folder = "drop"

[bench]
listen = %q

[access]
sign_in = false
review = true

[laboratory]
name = "Laboratory of the Drinking-Water Works, Example Valley"
address = ["12 Reservoir Road", "Example Valley"]
place = "Balance room 2"
country = "CH"
contact = "laboratory@waterworks.example"

[run]
rule = "simple"
method = "LW-12 Gravimetric calibration of burettes, edition 4, after ISO 4787"

[[equipment]]
kind = "balance"
name = "VB-220"
serial = "0021600412"
certificate = "VB-2026-0311"
issuer = "Example Metrology Service"
calibrated_on = "2026-03-11"
valid_until = "2027-03-31"

[[equipment]]
kind = "thermometer"
name = "Water thermometer T-4"
serial = "T4-118"
certificate = "TH-2026-0087"
issuer = "Example Metrology Service"
calibrated_on = "2026-02-02"
valid_until = "2027-02-28"

[[equipment]]
kind = "barometer"
name = "Room station R-2"
serial = "R2-554"
certificate = "PB-2025-0412"
issuer = "Example Metrology Service"
calibrated_on = "2025-12-15"
valid_until = "2026-12-31"

[[equipment]]
kind = "hygrometer"
name = "Room station R-2"
serial = "R2-554"
certificate = "RH-2025-0413"
issuer = "Example Metrology Service"
calibrated_on = "2025-12-15"
valid_until = "2026-12-31"

[[station]]
name = "bench-1"
port = %q
baud = 9600
capture = "settle"
readability_g = "0.0001"
repeatability_g = "0.0001"
dwell_s = %q
listen_s = "0.1"
reply_s = "0.3"
`

// writeConfig writes the configuration into the demo's folder and loads it as the
// daemon would.
func (s *stage) writeConfig(listen string) (*config, error) {
	file := filepath.Join(s.folder, "config.toml")
	dwell := round(max(1.5/s.opt.pace, 0.03), 3).String()
	if err := os.WriteFile(file, fmt.Appendf(nil, demoConfig, listen, s.pty.Path, dwell), 0o644); err != nil {
		return nil, fmt.Errorf("demo configuration: %w", err)
	}
	return loadConfig(file)
}

// play registers the burette, has it calibrated, and shows the result.
func (s *stage) play(ctx context.Context, io stdio) error {
	operator := s.operator(s.daemon.Address(), io)
	if err := operator.register(ctx); err != nil {
		return err
	}
	if err := operator.calibrate(ctx, demoRun()); err != nil {
		return err
	}
	return s.show(operator.run, io)
}

func (s *stage) operator(address string, io stdio) *virtualOperator {
	api := newClient(address, "m.berg")
	return &virtualOperator{api: api, reviewer: api.as("t.okafor"), bench: s.bench, out: io.out, misread: 3, spill: 7}
}

// demoRun is what the operator opens.
func demoRun() map[string]any {
	return map[string]any{
		"burette": "B-07", "station": "bench-1",
		"plan": map[string]any{
			"points_mL": []string{"10", "20", "30", "40", "50"}, "replicates": 2,
			"reading_pattern": session.Stepwise, "weighing_pattern": session.Separate,
		},
		"ambient": map[string]string{"air_temp_C": "21.3", "pressure_hPa": "1004.2", "humidity_pct": "45"},
	}
}

// show prints the corrections beside the hidden truth, and where everything is.
func (s *stage) show(run string, io stdio) error {
	folder := filepath.Join(s.config.Publish.Folder, s.daemon.folderName(run))
	text, err := os.ReadFile(filepath.Join(folder, "run.json"))
	if err != nil {
		return fmt.Errorf("read the published run: %w", err)
	}
	var doc session.Document
	if err := json.Unmarshal(text, &doc); err != nil {
		return fmt.Errorf("read the published run: %w", err)
	}
	fmt.Fprintf(io.out, "\n  reading   correction        U    hidden truth\n")
	for _, p := range doc.Curve.Points {
		truth := s.bench.TrueCorrection(p.ReadingML)
		mark := "within U"
		if math.Abs(truth-p.CorrectionML) > p.ExpandedML {
			mark = "outside U"
		}
		fmt.Fprintf(io.out, "  %5.1f mL  %+.4f mL  %.4f mL  %+.4f mL  %s\n", p.ReadingML, p.CorrectionML, p.ExpandedML, truth, mark)
	}
	c := doc.Conformity
	verdict := "the class is met"
	if c.Verdict != "meets" {
		verdict = "the class is not met"
	}
	fmt.Fprintf(io.out, "\nclass %s, limit ±%g mL, rule %s: %s (probability of conformity %.3f)\n", c.Class, c.MPEML, c.Rule, verdict, c.PConform)
	fmt.Fprintf(io.out, "\ndrop    %s\nledger  %s\npage    %s\n", folder, s.config.Ledger.Path, s.daemon.Address())
	return nil
}
