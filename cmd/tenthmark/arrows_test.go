package main

import (
	"encoding/json"
	"errors"
	"io"
	"os/exec"
	"slices"
	"strings"
	"testing"
)

// arrows says which packages of the house a package may import. What is not listed
// may import nothing of it. calc/decimal serves all.
var arrows = map[string][]string{
	"calc/decimal":    {},
	"calc":            {},
	"protocol":        {},
	"session":         {"calc"},
	"session/desk":    {"session"},
	"session/ledger":  {"session"},
	"session/publish": {"session", "calc"},
	"session/bench":   {"session", "session/desk", "calc"},
	"acquire/settle":  {"protocol"},
	"acquire/line":    {"session"},
	"acquire":         {"protocol", "acquire/line", "acquire/settle", "session"},
	"acquire/virtual": {"protocol", "calc"},
	"cmd/tenthmark":   {"*"},
}

// pure packages know no file, no network, no clock and no logger. Of package time
// they use durations and moments that were handed to them.
var pure = []string{"calc", "calc/decimal", "protocol", "acquire/settle", "session"}

var impure = []string{
	"os", "os/exec", "net", "net/http", "log", "log/slog", "database/sql", "syscall",
	"github.com/rs/zerolog", "go.bug.st/serial", "modernc.org/sqlite",
}

// homes says which package alone may import a driver.
var homes = map[string]string{
	"modernc.org/sqlite": "session/ledger",
	"go.bug.st/serial":   "acquire/line",
}

type listed struct {
	ImportPath string
	Imports    []string
}

func listPackages(t *testing.T) []listed {
	t.Helper()
	cmd := exec.Command("go", "list", "-json=ImportPath,Imports", "tenthmark/...")
	out, err := cmd.Output()
	if err != nil {
		t.Fatalf("go list: %v", err)
	}
	var all []listed
	for d := json.NewDecoder(strings.NewReader(string(out))); ; {
		var p listed
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			return all
		} else if err != nil {
			t.Fatal(err)
		}
		all = append(all, p)
	}
}

func TestArrowsGoOneWayOnly(t *testing.T) {
	for _, p := range listPackages(t) {
		name := strings.TrimPrefix(p.ImportPath, "tenthmark/")
		allowed, known := arrows[name]
		if !known {
			t.Errorf("package %s has no place in the house: give it one in arrows", name)
		}
		for _, imported := range p.Imports {
			to, ours := strings.CutPrefix(imported, "tenthmark/")
			if ours && to != "calc/decimal" && !slices.Contains(allowed, to) && !slices.Contains(allowed, "*") {
				t.Errorf("%s imports %s, against the arrows", name, to)
			}
		}
	}
}

func TestPurePackagesStayPure(t *testing.T) {
	for _, p := range listPackages(t) {
		name := strings.TrimPrefix(p.ImportPath, "tenthmark/")
		if !slices.Contains(pure, name) {
			continue
		}
		for _, imported := range p.Imports {
			if slices.Contains(impure, imported) {
				t.Errorf("%s is pure and imports %s", name, imported)
			}
		}
	}
}

func TestEachDriverHasOneHome(t *testing.T) {
	for _, p := range listPackages(t) {
		name := strings.TrimPrefix(p.ImportPath, "tenthmark/")
		for driver, home := range homes {
			if name != home && slices.ContainsFunc(p.Imports, func(i string) bool { return i == driver || strings.HasPrefix(i, driver+"/") }) {
				t.Errorf("%s imports %s, which is %s's alone", name, driver, home)
			}
		}
	}
}
