package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"net/url"
	"strconv"

	"tenthmark/session/ledger"
)

// get fetches a text from the daemon.
func (c *client) get(ctx context.Context, path string) ([]byte, error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, c.base+path, nil)
	if err != nil {
		return nil, err
	}
	if c.operator != "" {
		req.Header.Set("X-Operator", c.operator)
	}
	resp, err := c.http.Do(req)
	if err != nil {
		return nil, err
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(resp.Body)
	if err != nil {
		return nil, err
	}
	if resp.StatusCode >= 400 {
		return nil, asProblem(resp, text)
	}
	return text, nil
}

// daemonEvents asks the daemon for pages of events; it answers with their exact lines.
func daemonEvents(daemon *client) eventSource {
	return func(ctx context.Context, f ledger.Filter) ([]ledger.Entry, error) {
		q := url.Values{"after": {strconv.FormatInt(f.After, 10)}, "limit": {strconv.Itoa(f.Limit)}}
		for name, value := range map[string]string{"run": f.Subject, "kind": f.Kind, "actor": f.Actor} {
			if value != "" {
				q.Set(name, value)
			}
		}
		text, err := daemon.get(ctx, "/api/v1/ledger/events?"+q.Encode())
		if err != nil {
			return nil, err
		}
		return splitLines(text)
	}
}

func splitLines(text []byte) ([]ledger.Entry, error) {
	var out []ledger.Entry
	in := bufio.NewScanner(bytes.NewReader(text))
	in.Buffer(nil, ledger.MaxBody+2)
	for in.Scan() {
		line := bytes.Clone(in.Bytes())
		h, err := ledger.ParseHeader(line)
		if err != nil {
			return nil, fmt.Errorf("the daemon's answer: %w", err)
		}
		out = append(out, ledger.Entry{Seq: h.Seq, Body: line})
	}
	return out, in.Err()
}

// daemonCheckpoint asks for the newest signed checkpoint, as text or as the field
// "checkpoint" of a JSON object.
func daemonCheckpoint(ctx context.Context, daemon *client) ([]byte, error) {
	text, err := daemon.get(ctx, "/api/v1/ledger/checkpoint")
	if err != nil {
		return nil, err
	}
	var as struct {
		Checkpoint string `json:"checkpoint"`
	}
	if json.Unmarshal(text, &as) == nil && as.Checkpoint != "" {
		return []byte(as.Checkpoint), nil
	}
	return text, nil
}

// verifyDaemon checks what a running daemon hands out: all events, against its newest
// checkpoint and what the caller brings along. Nothing that the daemon says about itself
// is believed.
func verifyDaemon(ctx context.Context, daemon *client, opt ledger.VerifyOptions) (ledger.Report, error) {
	signed, err := daemonCheckpoint(ctx, daemon)
	if err != nil {
		return ledger.Report{}, err
	}
	lines, w := io.Pipe()
	sent := make(chan error, 1)
	go func() {
		err := exportLines(ctx, daemonEvents(daemon), w)
		sent <- err
		w.CloseWithError(err)
	}()
	report, err := ledger.VerifyExport(lines, signed, opt)
	lines.CloseWithError(io.ErrClosedPipe)
	if sending := <-sent; sending != nil && err == nil {
		err = sending
	}
	report.Path = daemon.base
	return report, err
}
