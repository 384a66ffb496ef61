package virtual

import (
	"context"
	"errors"
	"fmt"
	"io"
	"time"
)

// Serve lets the balance live on a line until ctx ends or the line does: it obeys what
// comes and sends what the display updates bring, with Pace times the speed of the
// clock on the wall. It closes the line when it returns. An end because of ctx gives
// ctx's error.
func (b *Balance) Serve(ctx context.Context, rw io.ReadWriteCloser) error {
	ctx, cancel := context.WithCancelCause(ctx)
	closed := context.AfterFunc(ctx, func() { rw.Close() })
	done := make(chan struct{})
	go func() {
		defer close(done)
		cancel(b.listen(rw))
	}()
	err := b.talk(ctx, rw)
	cancel(err)
	<-done
	if closed() {
		rw.Close()
	}
	return err
}

// listen obeys until the line ends.
func (b *Balance) listen(r io.Reader) error {
	buf := make([]byte, 256)
	for {
		n, err := r.Read(buf)
		b.Command(buf[:n])
		if err != nil {
			return fmt.Errorf("virtual balance: read: %w", err)
		}
	}
}

// talk steps the balance at its rate and sends what it prints.
func (b *Balance) talk(ctx context.Context, w io.Writer) error {
	update := b.opt.update()
	ticker := time.NewTicker(max(time.Duration(float64(update)/b.opt.Pace), 100*time.Microsecond))
	defer ticker.Stop()
	for {
		select {
		case <-ctx.Done():
			return context.Cause(ctx)
		case <-ticker.C:
		}
		sent := b.Step(update)
		if len(sent) == 0 {
			continue
		}
		if _, err := w.Write(sent); err != nil && !errors.Is(err, ErrNobodyReads) {
			return fmt.Errorf("virtual balance: write: %w", err)
		}
	}
}

// ErrNobodyReads is what the write to a line gives that takes no more bytes: as on a
// real balance without a computer, they are lost.
var ErrNobodyReads = errors.New("nobody reads")
