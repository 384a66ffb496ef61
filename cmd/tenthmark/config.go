package main

import (
	"errors"
	"fmt"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"sort"
	"strconv"
	"strings"
	"time"

	"github.com/BurntSushi/toml"

	"tenthmark/acquire"
	"tenthmark/calc"
	"tenthmark/calc/decimal"
	"tenthmark/session"
)

// config is the configuration file. Relative paths in it count from the folder that
// the file is in.
type config struct {
	Ledger     ledgerConfig        `toml:"ledger"`
	Publish    publishConfig       `toml:"publish"`
	Bench      benchConfig         `toml:"bench"`
	Access     accessConfig        `toml:"access"`
	Laboratory session.Laboratory  `toml:"laboratory"`
	Equipment  []session.Equipment `toml:"equipment"`
	Run        runConfig           `toml:"run"`
	Inputs     inputsConfig        `toml:"inputs"`
	Stations   []acquire.Config    `toml:"station"`
	Logs       []acquire.LogConfig `toml:"log"`

	file string // where it came from
}

type ledgerConfig struct {
	Path          string `toml:"path"`
	Key           string `toml:"key"`
	Origin        string `toml:"origin"`
	BackupFolder  string `toml:"backup_folder"`
	BackupHours   int    `toml:"backup_hours"`
	SegmentFolder string `toml:"segment_folder"`
}

type publishConfig struct {
	Folder string `toml:"folder"`
	Prefix string `toml:"prefix"`
	Paper  string `toml:"paper"`
}

type benchConfig struct {
	Listen  string `toml:"listen"`
	TLSCert string `toml:"tls_cert"`
	TLSKey  string `toml:"tls_key"`
	Zone    string `toml:"zone"`
}

type accessConfig struct {
	SignIn bool  `toml:"sign_in"`
	Review *bool `toml:"review"` // default: as sign_in
}

type runConfig struct {
	Rule     string `toml:"rule"`
	Standard string `toml:"standard"`
	Method   string `toml:"method"`
	Check    string `toml:"check_weight"` // label of the [[log]] that must be within its tolerance today
}

// inputsConfig overrides calc's defaults; a key that is left out keeps its default.
type inputsConfig struct {
	WaterDensity     string         `toml:"water_density"`
	AirDensity       string         `toml:"air_density"`
	CO2Fraction      decimal.Number `toml:"co2_fraction"`
	WeightDensity    decimal.Number `toml:"weight_density_kg_m3"`
	UReadingML       decimal.Number `toml:"u_reading_mL"`
	UWaterTempC      decimal.Number `toml:"u_water_temp_C"`
	UDeliveryML      decimal.Number `toml:"u_delivery_mL"`
	UThermometerC    decimal.Number `toml:"u_thermometer_C"`
	UAirTempC        decimal.Number `toml:"u_air_temp_C"`
	UPressureHPa     decimal.Number `toml:"u_pressure_hPa"`
	UHumidityPct     decimal.Number `toml:"u_humidity_pct"`
	UWaterDensityRel decimal.Number `toml:"u_water_density_rel"`
	UAirDensityRel   decimal.Number `toml:"u_air_density_rel"`
	UExpansionRel    decimal.Number `toml:"u_expansion_rel"`
	UWeightDensity   decimal.Number `toml:"u_weight_density_kg_m3"`
	Coverage         decimal.Number `toml:"coverage_probability"`
}

// finding is one thing that is wrong in a configuration file.
type finding struct {
	File, What, Hint string
	Line             int // 0: the file as a whole
}

func (f finding) String() string {
	where := f.File
	if f.Line > 0 {
		where = fmt.Sprintf("%s:%d", f.File, f.Line)
	}
	return fmt.Sprintf("%s: %s\n    %s", where, f.What, f.Hint)
}

// findings is an error that holds everything that is wrong with a file.
type findings []finding

func (f findings) Error() string {
	lines := make([]string, len(f))
	for i, one := range f {
		lines[i] = one.String()
	}
	return strings.Join(lines, "\n")
}

func defaultConfig() *config {
	return &config{
		Ledger:  ledgerConfig{Path: "ledger.db", BackupHours: 24},
		Publish: publishConfig{Folder: "drop", Paper: "A4"},
		Bench:   benchConfig{Listen: "127.0.0.1:8790"},
		Run:     runConfig{Rule: "simple"},
	}
}

// loadConfig reads and checks a configuration file. Its error is findings, with
// file, line and hint each.
func loadConfig(file string) (*config, error) {
	text, err := os.ReadFile(file)
	if err != nil {
		return nil, findings{{File: file, What: "The configuration cannot be read: " + errText(err), Hint: "Give the file with -c FILE; config.example.toml shows every key."}}
	}
	c := defaultConfig()
	meta, err := toml.Decode(string(text), c)
	if err != nil {
		return nil, findings{decodeFinding(file, err)}
	}
	found := unknownKeys(file, string(text), meta)
	c.file = file
	c.resolve(filepath.Dir(file))
	found = append(found, c.check(string(text))...)
	if len(found) > 0 {
		sort.SliceStable(found, func(i, j int) bool { return found[i].Line < found[j].Line })
		return nil, found
	}
	return c, nil
}

func decodeFinding(file string, err error) finding {
	f := finding{File: file, What: err.Error(), Hint: "Correct the line; config.example.toml shows the form of every key."}
	var parse toml.ParseError
	if errors.As(err, &parse) {
		f.Line = parse.Position.Line
	}
	if at := lineInError.FindStringSubmatch(f.What); f.Line == 0 && at != nil {
		f.Line, _ = strconv.Atoi(at[1]) // digits, by the pattern
	}
	return f
}

// lineInError finds the line in the library's messages about a value's type.
var lineInError = regexp.MustCompile(`line (\d+)`)

// unknownKeys: a misspelt key must not be taken silently for a default.
func unknownKeys(file, text string, meta toml.MetaData) findings {
	var found findings
	for _, key := range meta.Undecoded() {
		found = append(found, finding{
			File: file, Line: lineOf(text, key[len(key)-1]), What: fmt.Sprintf("The key %q is not known.", key.String()),
			Hint: "Check its spelling and the section it stands in; config.example.toml shows every key.",
		})
	}
	return found
}

// lineOf finds the line on which a key is set, 0 when it is not there.
func lineOf(text, key string) int {
	for i, line := range strings.Split(text, "\n") {
		line = strings.TrimSpace(line)
		name, _, found := strings.Cut(line, "=")
		if found && strings.Trim(strings.TrimSpace(name), `"'`) == key || strings.Trim(line, "[] ") == key {
			return i + 1
		}
	}
	return 0
}

// resolve makes the paths absolute or relative to the working folder.
func (c *config) resolve(folder string) {
	at := func(path *string) {
		if *path != "" && !filepath.IsAbs(*path) {
			*path = filepath.Join(folder, *path)
		}
	}
	if c.Ledger.Key == "" {
		c.Ledger.Key = c.Ledger.Path + ".key"
	}
	for _, path := range []*string{&c.Ledger.Path, &c.Ledger.Key, &c.Ledger.BackupFolder, &c.Ledger.SegmentFolder, &c.Publish.Folder, &c.Bench.TLSCert, &c.Bench.TLSKey, &c.Laboratory.Logo} {
		at(path)
	}
	for i := range c.Stations {
		at(&c.Stations[i].Replay)
		at(&c.Stations[i].Record)
	}
}

// check finds bad values. text is the file, to name lines.
func (c *config) check(text string) findings {
	var found findings
	bad := func(key, what, hint string) {
		found = append(found, finding{File: c.file, Line: lineOf(text, key), What: what, Hint: hint})
	}
	if c.Ledger.Origin != "" && session.CheckName("origin", c.Ledger.Origin) != nil {
		bad("origin", fmt.Sprintf("The origin %q cannot be used.", c.Ledger.Origin), "Use letters, digits, points and hyphens, for example lab.example.")
	}
	if c.Publish.Paper != "A4" && c.Publish.Paper != "Letter" {
		bad("paper", fmt.Sprintf("The paper %q is not known.", c.Publish.Paper), "Use A4 or Letter.")
	}
	if _, err := c.zone(); err != nil {
		bad("zone", fmt.Sprintf("The time zone %q is not known.", c.Bench.Zone), "Use a name like Europe/Berlin, or leave it out for the computer's own.")
	}
	switch c.Run.Rule {
	case "simple", "guarded", "non-binary":
	default:
		bad("rule", fmt.Sprintf("The decision rule %q is not known.", c.Run.Rule), "Use simple, guarded or non-binary.")
	}
	if err := c.checkListen(); err != nil {
		bad("listen", err.Error(), "Use 127.0.0.1:8790 for this computer alone. Other addresses need tls_cert, tls_key and sign_in = true.")
	}
	if err := c.setting("").Inputs.Check(); err != nil {
		bad("inputs", err.Error(), "Correct the value in [inputs]; config.example.toml names units and defaults.")
	}
	return append(append(found, c.checkStations(text)...), c.checkLogs(text)...)
}

func (c *config) checkStations(text string) findings {
	var found findings
	seen := map[string]bool{}
	for i := range c.Stations {
		s := &c.Stations[i]
		if err := session.CheckName("station", s.Name); err != nil {
			found = append(found, finding{c.file, fmt.Sprintf("Station %d: %s", i+1, err), "Give every [[station]] a name like bench-1.", lineOf(text, "name")})
		} else if seen[s.Name] {
			found = append(found, finding{c.file, fmt.Sprintf("Two stations have the name %q.", s.Name), "Give every [[station]] a name of its own.", lineOf(text, "name")})
		}
		seen[s.Name] = true
		if err := s.Check(); err != nil {
			found = append(found, stationFinding(c.file, text, s.Name, err))
		}
	}
	return found
}

func stationFinding(file, text, station string, err error) finding {
	f := finding{File: file, What: fmt.Sprintf("Station %s: %v", station, err), Hint: "Correct the value in its [[station]] section.", Line: lineOf(text, "station")}
	var fault *session.Fault
	if errors.As(err, &fault) {
		f.What, f.Hint = fmt.Sprintf("Station %s: %s", station, fault.Message), fault.Hint
	}
	for _, word := range strings.FieldsFunc(f.What, func(r rune) bool { return strings.ContainsRune(" \":;,.", r) }) {
		if line := lineOf(text, word); line > 0 {
			f.Line = line
			break
		}
	}
	return f
}

func (c *config) checkLogs(text string) findings {
	var found findings
	for _, l := range c.Logs {
		if c.station(l.Station) == nil {
			found = append(found, finding{c.file, fmt.Sprintf("The log %q names station %q, which is not there.", l.Label, l.Station), "Name one of the [[station]] sections.", lineOf(text, "log")})
		}
	}
	for _, l := range c.Logs {
		var fault *session.Fault
		if err := l.Check(); errors.As(err, &fault) {
			found = append(found, finding{c.file, fault.Message, fault.Hint, lineOf(text, strings.TrimPrefix(fault.Code, "log-"))})
		}
	}
	if c.Run.Check != "" && !slices.ContainsFunc(c.Logs, func(l acquire.LogConfig) bool { return l.Label == c.Run.Check && l.ToleranceG.IsSet() }) {
		found = append(found, finding{c.file, fmt.Sprintf("check_weight = %q names no [[log]] with a tolerance.", c.Run.Check), "Give a [[log]] that label, a nominal_g and a tolerance_g.", lineOf(text, "check_weight")})
	}
	return found
}

func (c *config) station(name string) *acquire.Config {
	for i := range c.Stations {
		if c.Stations[i].Name == name {
			return &c.Stations[i]
		}
	}
	return nil
}

// checkListen: beyond loopback, encryption and sign-in are demanded.
func (c *config) checkListen() error {
	loopback, err := isLoopback(c.Bench.Listen)
	if err != nil {
		return err
	}
	if !loopback && (c.Bench.TLSCert == "" || c.Bench.TLSKey == "" || !c.Access.SignIn) {
		return fmt.Errorf("listen = %q can be reached from other computers, and there is no encryption or no sign-in", c.Bench.Listen)
	}
	return nil
}

func (c *config) zone() (*time.Location, error) {
	if c.Bench.Zone == "" {
		return time.Local, nil
	}
	return time.LoadLocation(c.Bench.Zone)
}

func (c *config) review() bool {
	if c.Access.Review != nil {
		return *c.Access.Review
	}
	return c.Access.SignIn
}

// setting gives what a run on the station rests on; "" is no station in particular.
func (c *config) setting(station string) session.Setting {
	s := session.Setting{
		Inputs: c.Inputs.apply(calc.DefaultInputs()), Standard: c.Run.Standard, Rule: c.Run.Rule, Method: c.Run.Method, CheckWeight: c.Run.Check,
		Laboratory: c.Laboratory, Equipment: c.Equipment, SignIn: c.Access.SignIn, Review: c.review(), Software: "tenthmark " + version(),
	}
	if st := c.station(station); st != nil {
		set(&s.Inputs.UWeighingG, st.RepeatabilityG)
		set(&s.Inputs.USensitivityRel, st.USensitivityRel)
	}
	return s
}

// set overwrites a default when a number was given.
func set(where *float64, n decimal.Number) {
	if n.IsSet() {
		*where = n.Float()
	}
}

func (c inputsConfig) apply(in calc.Inputs) calc.Inputs {
	if c.WaterDensity != "" {
		in.WaterDensity = c.WaterDensity
	}
	if c.AirDensity != "" {
		in.AirDensity = c.AirDensity
	}
	set(&in.CO2Fraction, c.CO2Fraction)
	set(&in.WeightDensityKgM3, c.WeightDensity)
	set(&in.UReadingML, c.UReadingML)
	set(&in.UWaterTempC, c.UWaterTempC)
	set(&in.UDeliveryML, c.UDeliveryML)
	set(&in.UThermometerC, c.UThermometerC)
	set(&in.UAirTempC, c.UAirTempC)
	set(&in.UPressureHPa, c.UPressureHPa)
	set(&in.UHumidityPct, c.UHumidityPct)
	set(&in.UWaterDensityRel, c.UWaterDensityRel)
	set(&in.UAirDensityRel, c.UAirDensityRel)
	set(&in.UExpansionRel, c.UExpansionRel)
	set(&in.UWeightDensityKgM3, c.UWeightDensity)
	set(&in.CoverageProbability, c.Coverage)
	return in
}
