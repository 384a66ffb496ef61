package bench

import (
	"context"
	"fmt"
	"net/http"
	"runtime/debug"
	"slices"
	"strings"
	"time"

	"tenthmark/session"
)

// route is one call of the API.
type route struct {
	method, path string
	act          session.Action // what it takes to be allowed; empty: open to everybody
	handle       func(*Bench, *call) error
	records      []session.Kind // what it may record; empty for calls that only read
}

const api = "/api/v1"

// routes is every call there is. A call that changes anything records it: the last
// column says as what.
var routes = []route{
	{"GET", api + "/health", "", (*Bench).health, nil},
	{"GET", api + "/stations", session.ActLook, (*Bench).stations, nil},
	{"POST", api + "/stations/{station}/tare", session.ActMeasure, (*Bench).tare, []session.Kind{session.StationTared}},

	{"GET", api + "/burettes", session.ActLook, (*Bench).burettes, nil},
	{"GET", api + "/burettes/{burette}", session.ActLook, (*Bench).burette, nil},
	{"POST", api + "/burettes", session.ActRegister, (*Bench).registerBurette, []session.Kind{session.BuretteRegistered}},
	{"PUT", api + "/burettes/{burette}", session.ActRegister, (*Bench).changeBurette, []session.Kind{session.BuretteChanged}},

	{"GET", api + "/runs", session.ActLook, (*Bench).runs, nil},
	{"POST", api + "/runs", session.ActMeasure, (*Bench).openRun, []session.Kind{session.RunOpened, session.AmbientMade}},
	{"GET", api + "/runs/{run}", session.ActLook, (*Bench).run, nil},
	{"POST", api + "/runs/{run}/facts", session.ActMeasure, (*Bench).enterFacts, []session.Kind{session.ReadingMade, session.WaterTempMade, session.AmbientMade}},
	{"POST", api + "/runs/{run}/take", session.ActMeasure, (*Bench).takeWeight, []session.Kind{session.WeightTaken}},
	{"POST", api + "/runs/{run}/amend", session.ActMeasure, (*Bench).amendFact, []session.Kind{session.FactAmended, session.WeightTaken}},
	{"POST", api + "/runs/{run}/void", session.ActMeasure, (*Bench).voidDelivery, []session.Kind{session.DeliveryVoid}},
	{"POST", api + "/runs/{run}/answer", session.ActMeasure, (*Bench).answerDoubt, []session.Kind{session.DoubtAnswered}},
	{"POST", api + "/runs/{run}/suspend", session.ActMeasure, step(session.RunSuspended), []session.Kind{session.RunSuspended}},
	{"POST", api + "/runs/{run}/resume", session.ActMeasure, step(session.RunResumed), []session.Kind{session.RunResumed}},
	{"POST", api + "/runs/{run}/abandon", session.ActMeasure, step(session.RunAbandoned), []session.Kind{session.RunAbandoned}},
	{"POST", api + "/runs/{run}/reopen", session.ActMeasure, step(session.RunReopened), []session.Kind{session.RunReopened}},
	{"POST", api + "/runs/{run}/finish", session.ActMeasure, (*Bench).finishRun, []session.Kind{session.RunFinished, session.SignInRefused}},
	{"POST", api + "/runs/{run}/trail-review", session.ActReview, (*Bench).reviewTrail, []session.Kind{session.TrailReviewed, session.SignInRefused}},
	{"POST", api + "/runs/{run}/review", session.ActReview, (*Bench).reviewRun, []session.Kind{session.RunReviewed, session.SignInRefused}},
	{"GET", api + "/runs/{run}/documents/{name}", session.ActLook, (*Bench).document, nil},
	{"GET", api + "/outbox", session.ActLook, (*Bench).outbox, nil},

	{"GET", api + "/curves/{burette}", session.ActLook, (*Bench).curve, nil},
	{"POST", api + "/curves/{burette}/titrations", session.ActCorrect, (*Bench).titrations, nil},

	{"GET", api + "/ledger/events", session.ActLook, (*Bench).events, nil},
	{"GET", api + "/ledger/checkpoint", session.ActLook, (*Bench).checkpoint, nil},
	{"POST", api + "/ledger/backup", session.ActKeep, (*Bench).backup, []session.Kind{session.BackupMade}},
	{"GET", api + "/stream", session.ActLook, (*Bench).stream, nil},

	{"POST", api + "/sign-in", "", (*Bench).signIn, []session.Kind{session.SignedIn, session.SignInRefused}},
	{"POST", api + "/sign-out", session.ActLook, (*Bench).signOut, []session.Kind{session.SignedOut}},
	{"GET", api + "/me", "", (*Bench).me, nil},
	{"GET", api + "/operators", session.ActLook, (*Bench).operators, nil},
	{"POST", api + "/operators", session.ActPeople, (*Bench).addOperator, []session.Kind{session.OperatorAdded}},
	{"PUT", api + "/operators/{operator}", session.ActPeople, (*Bench).changeOperator, []session.Kind{session.OperatorChanged}},

	{"GET", "/api/openapi.json", "", (*Bench).openAPI, nil},
}

func (b *Bench) newMux() *http.ServeMux {
	mux := http.NewServeMux()
	for _, rt := range routes {
		mux.Handle(rt.method+" "+rt.path, b.serve(rt))
	}
	mux.HandleFunc("/api/", b.noSuchCall)
	mux.Handle("/", b.pages())
	return mux
}

// callTimeout ends what a call waits for. The stream has none.
const callTimeout = 20 * time.Second

// serve wraps a call: who makes it, may they, how long at most, and how it is refused.
func (b *Bench) serve(rt route) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Cache-Control", "no-store")
		if rt.path != api+"/stream" {
			ctx, cancel := context.WithTimeout(r.Context(), callTimeout)
			defer cancel()
			r = r.WithContext(ctx)
		}
		who, err := b.identify(r, rt.act)
		if err == nil {
			err = rt.handle(b, &call{r, w, who})
		}
		if err != nil {
			b.refuse(w, r, err)
		}
	})
}

// noSuchCall answers paths under /api/ that no call has, and calls with another method.
func (b *Bench) noSuchCall(w http.ResponseWriter, r *http.Request) {
	if allowed := b.methodsOf(r); len(allowed) > 0 {
		w.Header().Set("Allow", strings.Join(allowed, ", "))
		b.refuse(w, r, session.Refuse("wrong-method", fmt.Sprintf("%s does not take %s.", r.URL.Path, r.Method), "Use "+strings.Join(allowed, " or ")+"."))
		return
	}
	b.refuse(w, r, session.Refuse("no-such-call", fmt.Sprintf("There is no call %s %s.", r.Method, r.URL.Path), "The calls are listed in /api/openapi.json."))
}

func (b *Bench) methodsOf(r *http.Request) []string {
	var allowed []string
	for _, method := range []string{"GET", "POST", "PUT"} {
		other := *r
		other.Method = method
		if _, pattern := b.mux.Handler(&other); pattern != "/api/" && pattern != "" {
			allowed = append(allowed, method)
		}
	}
	return slices.Compact(allowed)
}

// securityHeaders go with every answer. The page needs nothing from anywhere else and
// has no script or style in its HTML.
var securityHeaders = map[string]string{
	"Content-Security-Policy":      "default-src 'none'; script-src 'self'; style-src 'self'; img-src 'self' data:; connect-src 'self'; font-src 'self'; manifest-src 'self'; base-uri 'none'; form-action 'self'; frame-ancestors 'none'",
	"X-Content-Type-Options":       "nosniff",
	"X-Frame-Options":              "DENY",
	"Referrer-Policy":              "no-referrer",
	"Cross-Origin-Opener-Policy":   "same-origin",
	"Cross-Origin-Resource-Policy": "same-origin",
	"Permissions-Policy":           "camera=(), microphone=(), geolocation=()",
}

// Handler gives everything that is served. A request of another site that could change
// something is refused before anything looks at it.
func (b *Bench) Handler() http.Handler {
	fence := http.NewCrossOriginProtection()
	fence.SetDenyHandler(http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		b.refuse(w, r, session.Refuse("other-site", "The call comes from a page of another site.", "Use the bench page itself, or a program."))
	}))
	inner := fence.Handler(b.mux)
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		for name, value := range securityHeaders {
			w.Header().Set(name, value)
		}
		defer b.survive(w, r)
		if err := b.checkHost(r); err != nil {
			b.refuse(w, r, err)
			return
		}
		inner.ServeHTTP(w, r)
	})
}

// survive keeps the daemon up when a call panics, and says so.
func (b *Bench) survive(w http.ResponseWriter, r *http.Request) {
	cause := recover()
	if cause == nil {
		return
	}
	if cause == http.ErrAbortHandler {
		panic(cause)
	}
	b.refuse(w, r, fmt.Errorf("panic: %v\n%s", cause, debug.Stack()))
}
