package ledger

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"os"
	"path/filepath"
	"time"

	"tenthmark/session"
)

// Export writes the lines of the events in [from, to) as JSON Lines: each line is an
// event's exact bytes. to < 0 means up to the newest.
func (s *store) Export(ctx context.Context, w io.Writer, from, to int64) error {
	size, err := s.countNow(ctx)
	if err != nil {
		return err
	}
	if to < 0 {
		to = size
	}
	if from < 0 || from > to || to > size {
		return fmt.Errorf("export events %d to %d: the ledger has %d", from, to, size)
	}
	out := bufio.NewWriterSize(w, 1<<16)
	err = s.eachRow(ctx, from, to, func(r row) error {
		if _, err := out.Write(r.body); err != nil {
			return err
		}
		return out.WriteByte('\n')
	})
	return errors.Join(alteredFault(s.path, err), out.Flush())
}

// Segment is one piece of the record in JSON Lines with the checkpoint that covers it.
type Segment struct {
	Name  string // file name without extension: events-000000000012-000000000099
	First int64
	End   int64 // one past the last event
}

// ExportSegment writes the events from the given number on into dir, as NAME.jsonl with
// the newest checkpoint as NAME.checkpoint, and gives the segment; with no new event it
// gives an empty one. The segments of a ledger, put one after another, are its whole
// record and can be checked with VerifyExport without the database.
func (l *Ledger) ExportSegment(ctx context.Context, dir string, from int64) (Segment, error) {
	signed, err := l.Checkpoint(ctx)
	if err != nil {
		return Segment{}, err
	}
	head, err := ReadCheckpoint(signed, l.PublicKey())
	if err != nil {
		return Segment{}, err
	}
	if from >= head.Size {
		return Segment{First: from, End: from}, nil
	}
	seg := Segment{Name: fmt.Sprintf("events-%012d-%012d", from, head.Size-1), First: from, End: head.Size}
	if err := writePublished(filepath.Join(dir, seg.Name+".jsonl"), func(w io.Writer) error {
		return l.Export(ctx, w, from, head.Size)
	}); err != nil {
		return Segment{}, segmentTrouble(dir, err)
	}
	err = writePublished(filepath.Join(dir, seg.Name+".checkpoint"), func(w io.Writer) error {
		_, err := w.Write(signed)
		return err
	})
	return seg, segmentTrouble(dir, err)
}

func segmentTrouble(dir string, err error) error {
	if err == nil {
		return nil
	}
	return &session.Fault{
		Code: "segment-failed", Message: "The events could not be copied to " + dir + ".",
		Hint: "Check that the folder is there and has space. They are in the ledger and are copied the next time.", Err: err,
	}
}

// writePublished writes a file beside, syncs it and gives it its name. An existing file
// of that name is replaced: the same events give the same bytes.
func writePublished(path string, fill func(io.Writer) error) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.part")
	if err != nil {
		return err
	}
	err = fill(f)
	if err == nil {
		err = errors.Join(f.Chmod(0o644), f.Sync())
	}
	if err := errors.Join(err, f.Close()); err != nil {
		return errors.Join(err, os.Remove(f.Name()))
	}
	if err := os.Rename(f.Name(), path); err != nil {
		return errors.Join(err, os.Remove(f.Name()))
	}
	return syncFolder(path)
}

// VerifyExport checks lines of events, beginning with event 0, as Verify checks a ledger:
// the tree is recomputed from the lines and compared with the signed checkpoint, which
// may be older than the last line, and with the ones in opt. Nothing else is needed, so
// it also checks what a daemon hands out.
func VerifyExport(lines io.Reader, signed []byte, opt VerifyOptions) (Report, error) {
	began := time.Now()
	c := newChecker(newStore("export"), opt)
	c.bare = true
	head, err := readUnsigned(signed)
	if err != nil {
		return c.report, err
	}
	c.stored = []sizedNote{{head.Size, signed}}
	if err := c.readOutside(); err != nil {
		return c.report, err
	}
	if err := c.lines(lines); err != nil {
		return c.report, err
	}
	c.conclude()
	c.report.Elapsed = time.Since(began)
	return c.report, nil
}

// lines checks each line as the next event.
func (c *checker) lines(lines io.Reader) error {
	in := bufio.NewReaderSize(lines, MaxBody+2)
	for {
		text, err := in.ReadSlice('\n')
		switch {
		case errors.Is(err, io.EOF) && len(text) == 0:
			return nil
		case errors.Is(err, io.EOF), errors.Is(err, bufio.ErrBufferFull):
			c.find(c.edge.size, "is not a whole line")
			return nil
		case err != nil:
			return fmt.Errorf("read event %d: %w", c.edge.size, err)
		}
		c.event(row{seq: c.edge.size, body: text[:len(text)-1]})
	}
}
