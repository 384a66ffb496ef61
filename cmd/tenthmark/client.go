package main

import (
	"bytes"
	"context"
	"encoding/json"
	"fmt"
	"io"
	"net/http"
	"time"
)

// client calls the daemon's API as any other program would.
type client struct {
	base     string // http://host:port
	operator string
	http     *http.Client
}

func newClient(base, operator string) *client {
	return &client{base: base, operator: operator, http: &http.Client{Timeout: 30 * time.Second}}
}

// as gives a client for another person.
func (c *client) as(operator string) *client {
	other := *c
	other.operator = operator
	return &other
}

// problem is an RFC 9457 problem document.
type problem struct {
	Status int    `json:"status"`
	Title  string `json:"title"`
	Detail string `json:"detail"`
	Code   string `json:"code"`
	Hint   string `json:"hint"`
}

func (p *problem) Error() string { return fmt.Sprintf("%s (%s)\n    %s", p.Detail, p.Code, p.Hint) }

// call sends a request and decodes the answer into out, if there is one. An error
// answer comes back as a *problem.
func (c *client) call(ctx context.Context, method, path string, in, out any) error {
	var body io.Reader
	if in != nil {
		b, err := json.Marshal(in)
		if err != nil {
			return err
		}
		body = bytes.NewReader(b)
	}
	req, err := http.NewRequestWithContext(ctx, method, c.base+path, body)
	if err != nil {
		return err
	}
	if in != nil {
		req.Header.Set("Content-Type", "application/json")
	}
	if c.operator != "" {
		req.Header.Set("X-Operator", c.operator)
	}
	resp, err := c.http.Do(req)
	if err != nil {
		return err
	}
	defer resp.Body.Close()
	answer, err := io.ReadAll(resp.Body)
	if err != nil {
		return err
	}
	if resp.StatusCode >= 400 {
		return asProblem(resp, answer)
	}
	if out == nil {
		return nil
	}
	if err := json.Unmarshal(answer, out); err != nil {
		return fmt.Errorf("%s %s: answer: %w", method, path, err)
	}
	return nil
}

func asProblem(resp *http.Response, answer []byte) error {
	p := &problem{}
	if err := json.Unmarshal(answer, p); err != nil || p.Code == "" {
		return fmt.Errorf("%s %s: %s", resp.Request.Method, resp.Request.URL.Path, resp.Status)
	}
	return p
}
