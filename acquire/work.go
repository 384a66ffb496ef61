package acquire

import (
	"context"
	"errors"
	"fmt"
	"time"

	"tenthmark/acquire/settle"
	"tenthmark/protocol"
	"tenthmark/session"
)

// work is the station's goroutine: what it holds needs no lock.
type work struct {
	*Station
	detector *settle.Detector
	began    time.Time // moments count from here
	lasted   time.Duration

	// of the present connection
	conn    Conn
	decoder *protocol.Decoder
	pending bool      // the last byte ended no line
	at      time.Time // when the present chunk came
	ask     interview
	poll    poller
	ready   bool // the interview is over: weights count
	shown   time.Time
	stable  bool
	status  string
	last    time.Time // of the last line that was understood
	damaged int       // lines in a row that could not be read
	taken   []settle.Settled
}

// The timing of a line.
const (
	lineGap   = 300 * time.Millisecond // silence that ends an unterminated line, at 1200 Bd some 36 characters
	silentFor = 20 * time.Second       // a listening station without a line for so long says so
	showEvery = 90 * time.Millisecond  // live values go to the sink no more often
)

// once opens the line and works until it is lost.
func (w *work) once(ctx context.Context) error {
	w.lasted = 0
	conn, err := w.opener(ctx)
	if err != nil {
		return err
	}
	opened := time.Now()
	readCtx, stop := context.WithCancel(ctx)
	chunks, readers := readChunks(readCtx, conn)
	w.begin(conn, opened)
	err = w.loop(ctx, chunks)
	stop()
	_ = conn.Close()    // a line that went away cannot be closed properly, and that is no news
	for range readers { // the reader closes the channel when it has returned
	}
	w.lasted = time.Since(opened)
	return err
}

// begin starts a connection: the first line may be the tail of one.
func (w *work) begin(conn Conn, now time.Time) {
	w.conn, w.at, w.last = conn, now, now
	w.pending, w.damaged = false, 0
	w.decoder = protocol.NewDecoder(protocol.Options{Pattern: w.pattern})
	w.decoder.Resync()
	w.ready, w.stable, w.shown = false, false, time.Time{}
	w.ask = newInterview(w.cfg, now)
	w.poll = newPoller(w.cfg)
	w.observe(settle.Sample{Kind: settle.Disturbed})
}

// loop serves one connection.
func (w *work) loop(ctx context.Context, chunks <-chan chunk) error {
	timer := time.NewTimer(0)
	defer timer.Stop()
	for {
		timer.Reset(time.Until(w.due()))
		select {
		case <-ctx.Done():
			return ctx.Err()
		case c, ok := <-chunks:
			if !ok {
				return errReaderEnded
			}
			if c.err != nil {
				w.decoder.End(w.frame)
				return errors.Join(w.deliver(ctx), c.err)
			}
			w.feed(c)
		case done := <-w.tare:
			done <- w.sendTare()
		case <-timer.C:
			if err := w.tick(time.Now()); err != nil {
				return err
			}
		}
		if err := w.deliver(ctx); err != nil {
			return err
		}
	}
}

var errReaderEnded = errors.New("the reader of the line ended")

// due gives the next moment at which something happens by itself.
func (w *work) due() time.Time {
	next := w.last.Add(silentFor)
	for _, at := range []time.Time{w.gapDue(), w.ask.due(), w.poll.due(w.ready)} {
		if !at.IsZero() && at.Before(next) {
			next = at
		}
	}
	return next
}

// gapDue: an unterminated line is cut off by silence.
func (w *work) gapDue() time.Time {
	if w.pending {
		return w.at.Add(lineGap)
	}
	return time.Time{}
}

func (w *work) feed(c chunk) {
	if c.at.Sub(w.at) > lineGap {
		w.decoder.Gap(w.frame)
	}
	w.at = c.at
	w.decoder.Feed(c.data, w.frame)
	w.pending = c.data[len(c.data)-1]&0x7F != '\n'
	c.release()
	w.checkSetting()
}

// tick does what is due.
func (w *work) tick(now time.Time) error {
	if at := w.gapDue(); !at.IsZero() && !now.Before(at) {
		w.pending = false
		w.decoder.Gap(w.frame)
		w.checkSetting()
	}
	if now.Sub(w.last) >= silentFor {
		w.last = now
		w.silent()
	}
	if err := w.interview(now); err != nil {
		return err
	}
	return w.pollNow(now)
}

// interview sends the next question, and brings the station online when all are
// answered or were left unanswered.
func (w *work) interview(now time.Time) error {
	if w.ready {
		return nil
	}
	question, over := w.ask.step(now)
	if question != "" {
		if err := w.conn.Write(question.Bytes()); err != nil {
			return fmt.Errorf("ask who the balance is: %w", err)
		}
	}
	if over {
		w.ready = true
		w.goOnline(w.conn.Name(), w.ask.identity)
		w.poll.begin(now, w.ask.unasked)
		if w.poll.passive {
			w.diagnoseAutoPrint()
		}
	}
	return nil
}

func (w *work) pollNow(now time.Time) error {
	if !w.ready {
		return nil
	}
	action := w.poll.step(now)
	switch action {
	case pollAsk:
		if err := w.conn.Write(protocol.Print.Bytes()); err != nil {
			return fmt.Errorf("ask for a weight: %w", err)
		}
	case pollProbe:
		if err := w.conn.Write(protocol.Serial.Bytes()); err != nil {
			return fmt.Errorf("ask whether the balance is there: %w", err)
		}
	case pollSilent:
		w.silent()
	case pollNotStable:
		w.diagnose(Diagnosis{DiagnoseNotStable, "The balance answers, but it does not come to rest.", "Close the draught shield, keep hands off the table, and wait; the station goes on by itself."})
	}
	return nil
}

func (w *work) silent() {
	w.diagnose(Diagnosis{DiagnoseSilent, "Nothing comes from the balance.", "Check that it is switched on, that its data output is on, and the cable; for a balance that prints only when asked set capture = \"poll\"."})
}

func (w *work) sendTare() error {
	if err := w.conn.Write(protocol.Tare.Bytes()); err != nil {
		return err
	}
	w.detector.Tared()
	return nil
}

// frame takes one decoded line.
func (w *work) frame(f *protocol.Frame) {
	w.change(func(snap *Snapshot) { snap.Lines++ })
	if f.Kind == protocol.Damaged {
		w.damage()
		return
	}
	w.last, w.damaged = w.at, 0
	w.well(DiagnoseSilent, DiagnoseUnread)
	if !w.ready {
		w.ask.hear(f, w.at)
	} else if w.poll.hear(f, w.at) {
		w.diagnoseAutoPrint()
	}
	if s, means := sampleOf(f); means {
		w.observe(s)
	}
	w.show(f)
	if f.Kind == protocol.Error {
		w.diagnose(Diagnosis{DiagnoseError, fmt.Sprintf("The balance reports error %s.", f.Code), "Its operating manual explains the code; it often asks for an adjustment or an empty pan."})
	} else if f.Kind == protocol.Weight {
		w.well(DiagnoseError, DiagnoseNotStable)
	}
}

// damage: one damaged line is nothing, very many in a row are a wrong setting.
func (w *work) damage() {
	const many = 20
	w.observe(settle.Sample{Kind: settle.Disturbed})
	if w.damaged++; w.damaged == many {
		w.diagnose(Diagnosis{DiagnoseUnread, "What comes from the balance cannot be read.", "Set baud, data_bits and parity as at the balance; `tenthmark listen --suggest` finds them."})
	}
}

func (w *work) diagnoseAutoPrint() {
	w.diagnose(Diagnosis{DiagnoseAutoPrint, "The balance prints by itself, so it is not asked.", "This is fine. Set capture = \"settle\", or switch automatic printing off at the balance."})
}

// observe gives a sample to the detector; weights wait in taken until deliver.
func (w *work) observe(s settle.Sample) {
	if !w.ready && s.Kind == settle.Weight {
		s.Kind = settle.Disturbed // not before it is known which balance this is
	}
	if settled, ok := w.detector.Observe(w.at.Sub(w.began), s); ok {
		w.taken = append(w.taken, settled)
	}
	if w.detector.Streaming() {
		w.diagnose(Diagnosis{DiagnoseStreaming, "The balance prints by itself, although a weight is to be taken at each press of PRINT.", "Switch automatic printing off at the balance, or set capture = \"settle\"."})
	}
}

// deliver hands the taken weights over.
func (w *work) deliver(ctx context.Context) error {
	for _, s := range w.taken {
		w.change(func(snap *Snapshot) { snap.Weights++ })
		w.log.Debug().Stringer("mass_g", s.MassG).Msg("weight taken")
		w.sink.Weight(ctx, Settled{
			Settled: s, Station: w.cfg.Name, Mode: settle.Mode(w.cfg.Capture), Identity: w.ask.identity,
			Came: w.wall().Add(s.At - time.Since(w.began)),
		})
	}
	w.taken = w.taken[:0]
	return nil
}

// show tells what the balance shows, not too often.
func (w *work) show(f *protocol.Frame) {
	stable := f.Kind == protocol.Weight && f.Stable
	status := statusText(f)
	if stable == w.stable && status == w.status && w.at.Sub(w.shown) < showEvery {
		return
	}
	w.shown, w.stable, w.status = w.at, stable, status
	live := Live{
		Text: valueText(f), Unit: f.Unit, Stable: stable, Status: status, Raw: append([]byte(nil), f.Raw...),
		At: w.wall().Add(-time.Since(w.at)), Progress: w.detector.Progress(), Armed: w.detector.Armed(),
	}
	if f.Kind == protocol.Weight && f.Plain && !f.InReport {
		live.MassG = f.MassG()
	}
	w.change(func(snap *Snapshot) { snap.Live = &live })
	w.sink.Live(w.cfg.Name, live)
}

// checkSetting looks for a line setting that does not fit.
func (w *work) checkSetting() {
	text := w.decoder.Diagnosis()
	if text == "" {
		w.well(DiagnoseSetting)
	} else {
		w.diagnose(Diagnosis{DiagnoseSetting, "The line setting does not fit the balance: " + text + ".", "Set baud, data_bits and parity as at the balance; `tenthmark listen --suggest` finds them."})
	}
}

// Identity gives what the balance last said of itself.
func (s *Station) Identity() session.Identity { return s.Snapshot().Identity }
