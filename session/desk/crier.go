package desk

import (
	"sync"

	"tenthmark/session"
)

// Notice is what listeners hear: an event that is durable, or that the ledger does
// not take events any more.
type Notice struct {
	Event   *session.Event
	Trouble error
}

// crier hands notices to listeners without ever waiting for one.
type crier struct {
	mu        sync.Mutex // guards both fields; never held across a send that can block
	listeners map[chan Notice]struct{}
	closed    bool
}

// backlog is how many notices a listener may be behind before it is dropped.
const backlog = 256

func newCrier() *crier { return &crier{listeners: map[chan Notice]struct{}{}} }

func (c *crier) listen() (notices <-chan Notice, stop func()) {
	ch := make(chan Notice, backlog)
	c.mu.Lock()
	defer c.mu.Unlock()
	if c.closed {
		close(ch)
		return ch, func() {}
	}
	c.listeners[ch] = struct{}{}
	return ch, func() { c.drop(ch) }
}

func (c *crier) drop(ch chan Notice) {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.dropLocked(ch)
}

func (c *crier) dropLocked(ch chan Notice) {
	if _, there := c.listeners[ch]; there {
		delete(c.listeners, ch)
		close(ch)
	}
}

func (c *crier) cry(n Notice) {
	c.mu.Lock()
	defer c.mu.Unlock()
	for ch := range c.listeners {
		select {
		case ch <- n:
		default:
			c.dropLocked(ch)
		}
	}
}

func (c *crier) close() {
	c.mu.Lock()
	defer c.mu.Unlock()
	c.closed = true
	for ch := range c.listeners {
		c.dropLocked(ch)
	}
}

// Listen gives the notices from now on. The channel is closed when the desk stops
// or when the listener falls too far behind; stop ends it.
func (d *Desk) Listen() (notices <-chan Notice, stop func()) { return d.crier.listen() }
