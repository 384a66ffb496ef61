package main

import (
	"errors"
	"os"
	"path/filepath"
	"strings"
	"testing"
)

func writeConfig(t *testing.T, text string) string {
	t.Helper()
	file := filepath.Join(t.TempDir(), "config.toml")
	if err := os.WriteFile(file, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	return file
}

const exampleFile = "../../config.example.toml"

func TestTheExampleIsInOrderAndHoldsTheDefaults(t *testing.T) {
	c, err := loadConfig(exampleFile)
	if err != nil {
		t.Fatal(err)
	}
	if got, want := c.setting("").Inputs, defaultConfig().setting("").Inputs; got != want {
		t.Errorf("inputs of the example %+v differ from the defaults %+v", got, want)
	}
	if c.Bench != defaultConfig().Bench || c.Run != defaultConfig().Run || c.Access.SignIn {
		t.Error("the example differs from the defaults")
	}
}

// Every key that the program knows stands in the example, set or commented.
func TestTheExampleHasEveryKey(t *testing.T) {
	text, err := os.ReadFile(exampleFile)
	if err != nil {
		t.Fatal(err)
	}
	for _, key := range tomlKeys(config{}) {
		if lineOf(strings.ReplaceAll(string(text), "# ", ""), key) == 0 {
			t.Errorf("config.example.toml lacks the key %s", key)
		}
	}
}

func TestWhatIsWrongIsNamedWithItsLine(t *testing.T) {
	tests := []struct {
		name, text, want string
		line             int
	}{
		{"unknown key", "[ledger]\npath = \"a.db\"\npaht = \"b\"\n", `"ledger.paht" is not known`, 3},
		{"unknown section", "[legder]\npath = \"a.db\"\n", "is not known", 1},
		{"wrong type", "[access]\nsign_in = \"yes\"\n", "sign_in", 2},
		{"no TOML", "[ledger\n", "", 0},
		{"bad rule", "[run]\nrule = \"generous\"\n", "decision rule", 2},
		{"open to the network", "[bench]\nlisten = \"0.0.0.0:8790\"\n", "other computers", 2},
		{"no number", "[inputs]\nu_reading_mL = \"six\"\n", "not a decimal number", 2},
		{"two stations of one name", "[[station]]\nname = \"a\"\nport = \"/dev/x\"\n[[station]]\nname = \"a\"\nport = \"/dev/y\"\n", "Two stations", 0},
		{"log without station", "[[log]]\nstation = \"nowhere\"\n", "not there", 0},
	}
	for _, tt := range tests {
		t.Run(tt.name, func(t *testing.T) {
			_, err := loadConfig(writeConfig(t, tt.text))
			var found findings
			if !errors.As(err, &found) {
				t.Fatalf("got %v, want findings", err)
			}
			if !strings.Contains(err.Error(), tt.want) || found[0].Hint == "" {
				t.Errorf("got %q, want it to name %q and a hint", err, tt.want)
			}
			if tt.line != 0 && found[0].Line != tt.line {
				t.Errorf("line %d, want %d", found[0].Line, tt.line)
			}
		})
	}
}
