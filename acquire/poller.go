package acquire

import (
	"time"

	"tenthmark/acquire/settle"
	"tenthmark/protocol"
)

// poller decides when to ask for a weight. One request is out at a time. A balance
// that prints at stability answers when it has come to rest or never, so a request
// without an answer is not simply repeated: first the balance is asked for its serial
// number, to tell silence from unrest. Answers are counted off against requests, so
// that a late one is never taken for the answer to the next. A balance that prints by
// itself is not asked: on many the command would toggle the printing.
type poller struct {
	on       bool
	passive  bool
	interval time.Duration
	timeout  time.Duration
	window   time.Duration // for the reply to a probe

	owed     int       // answers that are still to come
	next     time.Time // when something is to be done
	probing  bool
	alive    bool // the probe was answered
	answered bool // a request was answered on this connection
	probes   int  // in a row, answered, without a weight
	unasked  int  // lines in a row that nobody asked for
}

const (
	unaskedLines = 4               // one line too many may be a late answer or a press of PRINT
	mostProbes   = 3               // after so many the request counts as lost
	drainFor     = 2 * time.Second // for an answer that was owed beside the one that came
)

type pollAction uint8

const (
	pollNothing pollAction = iota
	pollAsk
	pollProbe // ask for the serial number: is anybody there?
	pollSilent
	pollNotStable
)

func newPoller(cfg Config) poller {
	return poller{
		on: cfg.Capture == string(settle.Poll) && cfg.Replay == "", interval: seconds(cfg.PollIntervalS),
		timeout: seconds(cfg.PollTimeoutS), window: seconds(cfg.ReplyS),
	}
}

// begin starts asking, unless lines came unasked.
func (p *poller) begin(now time.Time, unasked int) {
	p.passive = p.on && unasked > 1
	p.next = now
}

func (p *poller) due(ready bool) time.Time {
	if !p.on || p.passive || !ready {
		return time.Time{}
	}
	return p.next
}

// step says what to do now.
func (p *poller) step(now time.Time) pollAction {
	switch {
	case !p.on || p.passive || now.Before(p.next):
		return pollNothing
	case p.probing:
		return p.probed(now)
	case p.owed > 0 && p.probes < mostProbes:
		p.probing, p.alive = true, false
		p.next = now.Add(p.window)
		return pollProbe
	}
	p.owed = min(p.owed+1, 2)
	p.probes = 0
	p.next = now.Add(p.timeout)
	return pollAsk
}

// probed: the probe's window is over. A balance that is there goes on owing its
// answer. One that says nothing may be off, and then the request is lost, or it may be
// one that knows no such question.
func (p *poller) probed(now time.Time) pollAction {
	p.probing = false
	p.next = now.Add(p.timeout)
	if p.alive {
		p.probes++
		return pollNotStable
	}
	p.probes = mostProbes
	if p.answered {
		return pollNotStable
	}
	return pollSilent
}

// hear takes a line and says whether the balance was found to print by itself.
func (p *poller) hear(f *protocol.Frame, now time.Time) (autoPrint bool) {
	switch {
	case !p.on || p.passive || f.InReport:
		return false
	case f.Kind == protocol.Text:
		if p.probing {
			p.alive, p.next = true, now
		}
		return false
	case p.owed == 0:
		p.unasked++
		p.passive = p.unasked >= unaskedLines
		return p.passive
	}
	p.unasked, p.probes = 0, 0
	p.probing, p.answered = false, true
	p.owed--
	p.next = now.Add(p.interval)
	if p.owed > 0 {
		p.owed, p.next = 0, now.Add(drainFor)
	}
	return false
}
