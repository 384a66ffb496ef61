package bench

import (
	"bytes"
	"encoding/json"
	"fmt"
	"net/http"
	"strings"
	"sync"
	"testing"

	"github.com/santhosh-tekuri/jsonschema/v6"
)

type description struct {
	Paths map[string]map[string]struct {
		RequestBody json.RawMessage `json:"requestBody"`
		Security    json.RawMessage `json:"security"`
	} `json:"paths"`
}

func described(t *testing.T) description {
	t.Helper()
	var d description
	if err := json.Unmarshal(openAPIText, &d); err != nil {
		t.Fatal(err)
	}
	return d
}

func TestEveryCallIsDescribedAndEveryDescriptionIsACall(t *testing.T) {
	d := described(t)
	calls := map[string]bool{}
	for _, rt := range routes {
		calls[rt.method+" "+rt.path] = true
		got, there := d.Paths[rt.path][strings.ToLower(rt.method)]
		if !there {
			t.Errorf("%s %s is not described", rt.method, rt.path)
			continue
		}
		if open := string(got.Security) == "[]"; open != (rt.act == "") {
			t.Errorf("%s %s: described as open to everybody %v, and is %v", rt.method, rt.path, open, rt.act == "")
		}
	}
	for path, methods := range d.Paths {
		for method := range methods {
			if name := strings.ToUpper(method) + " " + path; !calls[name] {
				t.Errorf("%s is described and not there", name)
			}
		}
	}
}

// Requirement 25 of the table of data integrity requirements: whatever changes anything
// is an event. The only calls that change nothing by POST are those that compute.
func TestEveryChangingCallHasItsEvent(t *testing.T) {
	computes := map[string]bool{api + "/curves/{burette}/titrations": true}
	for _, rt := range routes {
		changes := rt.method != http.MethodGet && !computes[rt.path]
		if changes != (len(rt.records) > 0) {
			t.Errorf("%s %s: changes something %v, records %v", rt.method, rt.path, changes, rt.records)
		}
		if changes && rt.act == "" && rt.path != api+"/sign-in" {
			t.Errorf("%s %s changes something and is open to everybody", rt.method, rt.path)
		}
	}
}

// compiler reads the description once, for an independent validator.
var compiler = sync.OnceValues(func() (*jsonschema.Compiler, error) {
	doc, err := jsonschema.UnmarshalJSON(bytes.NewReader(openAPIText))
	if err != nil {
		return nil, err
	}
	c := jsonschema.NewCompiler()
	c.AssertFormat()
	return c, c.AddResource("openapi.json", doc)
})

var compiling sync.Mutex // the compiler is for one at a time

// checkDescribed holds the answer to a call against the description of that call.
func (l *laboratory) checkDescribed(req *http.Request, a answer) {
	l.t.Helper()
	_, pattern := l.bench.mux.Handler(req)
	method, path, found := strings.Cut(pattern, " ")
	kind, _, _ := strings.Cut(a.header.Get("Content-Type"), ";")
	if document := strings.HasSuffix(path, "{name}") && a.status < 300; !found || document || !strings.HasSuffix(kind, "json") {
		return
	}
	pointer := "/components/schemas/Problem"
	if kind == "application/json" {
		escape := strings.NewReplacer("~", "~0", "/", "~1", "{", "%7B", "}", "%7D")
		pointer = fmt.Sprintf("/paths/%s/%s/responses/%d/content/%s/schema", escape.Replace(path), strings.ToLower(method), a.status, escape.Replace(kind))
	}
	compiling.Lock()
	defer compiling.Unlock()
	c, err := compiler()
	if err != nil {
		l.t.Fatal(err)
	}
	s, err := c.Compile("openapi.json#" + pointer)
	if err != nil {
		l.t.Fatalf("%s answered with %d: %v", pattern, a.status, err)
	}
	v, err := jsonschema.UnmarshalJSON(bytes.NewReader(a.text))
	if err != nil {
		l.t.Fatal(err)
	}
	if err := s.Validate(v); err != nil {
		l.t.Errorf("%s does not answer as described: %v\n%s", pattern, err, a.text)
	}
}
