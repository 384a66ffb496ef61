package ledger

import (
	"bytes"
	"context"
	"crypto/sha256"
	"database/sql"
	"errors"
	"fmt"
	"time"

	"golang.org/x/mod/sumdb/note"
	"golang.org/x/mod/sumdb/tlog"
	"tenthmark/session"
)

// checker carries the verification of one ledger.
type checker struct {
	s      *store
	opt    VerifyOptions
	live   bool // events are being appended meanwhile
	bare   bool // lines without stored hashes
	report Report

	size    int64    // events at the begin
	edge    frontier // recomputed so far
	keys    keyring
	stored  []sizedNote // checkpoints still ahead
	outside []outsideHead
	words   *blockWords
	blocks  [][sha256.Size]byte // digest of each recomputed block of the index
	snap    *Snapshot
	signed  []byte // the snapshot's signature
	leaf    []byte // scratch
	nodes   []tlog.Hash
	halted  bool // replay stopped at its first error
	lost    bool // the numbers of the rows make no sense any more
}

// outsideHead is a checkpoint brought along.
type outsideHead struct {
	Head
	signed  []byte
	reached bool
}

func newChecker(s *store, opt VerifyOptions) *checker {
	return &checker{s: s, opt: opt, report: Report{Path: s.path, Findings: []*Finding{}}, words: newBlockWords()}
}

// find records a finding.
func (c *checker) find(seq int64, format string, args ...any) {
	if len(c.report.Findings) < maxFindings {
		c.report.Findings = append(c.report.Findings, &Finding{seq, fmt.Sprintf(format, args...)})
	}
}

// broken makes a finding of damage that SQLite reports and gives other errors on.
func (c *checker) broken(what string, err error) error {
	switch {
	case err == nil:
		return nil
	case errors.Is(err, ErrAltered):
		c.find(-1, "%s: %v", what, err)
		return nil
	case isDamage(err):
		c.find(-1, "the file is damaged (%s): %v", what, err)
		return nil
	}
	return explain("verify", c.s.path, err)
}

// run checks everything that the rows say.
func (c *checker) run(ctx context.Context) (Report, error) {
	began := time.Now()
	for _, part := range []func(context.Context) error{c.tables, c.small, c.events, c.finish} {
		if err := part(ctx); err != nil {
			return c.report, err
		}
	}
	c.report.Elapsed = time.Since(began)
	return c.report, nil
}

// tables checks that the file is a ledger with all its guards.
func (c *checker) tables(ctx context.Context) error {
	if err := c.s.enter(ctx); err != nil {
		return err
	}
	defer c.s.leave()
	err := c.s.checkIdentity(ctx)
	if code := session.FaultCode(err); code == "ledger-foreign" || code == "ledger-newer" {
		return err
	}
	return c.broken("tables", err)
}

// small reads the small tables and what was brought along.
func (c *checker) small(ctx context.Context) error {
	if err := c.s.enter(ctx); err != nil {
		return err
	}
	defer c.s.leave()
	var err error
	if c.size, err = countEvents(ctx, c.s.db); err != nil {
		return c.broken("events", err)
	}
	var before int64
	if err := c.s.db.QueryRowContext(ctx, `SELECT count(*) FROM event WHERE seq < 0`).Scan(&before); err != nil || before > 0 {
		c.find(-1, "%d events stand before the first (%v)", before, err)
	}
	if c.stored, err = c.s.checkpointRows(ctx); err != nil {
		if err := c.broken("checkpoints", err); err != nil {
			return err
		}
	}
	if err := c.readSnapshot(ctx); err != nil {
		return err
	}
	return c.readOutside()
}

func (c *checker) readSnapshot(ctx context.Context) error {
	var others int64
	err := c.s.db.QueryRowContext(ctx, `SELECT count(*) FROM snapshot`).Scan(&others)
	if err != nil || others == 0 {
		return c.broken("snapshot", err)
	}
	snap, signed, err := c.s.snapshotRow(ctx)
	if err != nil && !errors.Is(err, sql.ErrNoRows) {
		return c.broken("snapshot", err)
	}
	if others > 1 || snap.Size > c.size || snap.Size < 1 {
		c.find(-1, "the stored state is of %d events, the ledger has %d", snap.Size, c.size)
		return nil
	}
	c.snap, c.signed = &snap, signed
	return nil
}

// readOutside reads what was brought along; a note that cannot be read is an error of
// the caller, not a finding.
func (c *checker) readOutside() error {
	if c.opt.PublicKey != "" {
		if _, err := note.NewVerifier(c.opt.PublicKey); err != nil {
			return fmt.Errorf("verify: public key: %w", err)
		}
	}
	for _, signed := range c.opt.Checkpoints {
		head, err := readUnsigned(signed)
		if err != nil {
			return fmt.Errorf("verify: outside %w", err)
		}
		c.outside = append(c.outside, outsideHead{Head: head, signed: signed})
	}
	return nil
}

// events reads in one goroutine and checks in this one.
func (c *checker) events(ctx context.Context) error {
	ctx, stop := context.WithCancel(ctx)
	defer stop()
	batches := make(chan []row, 2)
	failed := make(chan error, 1)
	go func() {
		defer close(batches)
		failed <- c.read(ctx, batches)
	}()
	for batch := range batches {
		for _, r := range batch {
			c.event(r)
		}
	}
	return c.broken("events", <-failed)
}

// read sends all events before the size at the begin.
func (c *checker) read(ctx context.Context, batches chan<- []row) error {
	for from := int64(0); from < c.size; {
		batch, err := c.s.batch(ctx, from, int(min(batchRows, c.size-from)))
		if err != nil {
			return err
		}
		if len(batch) == 0 {
			return nil
		}
		from = batch[len(batch)-1].seq + 1
		select {
		case batches <- batch:
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	return nil
}

// event checks one row and everything that speaks about the tree of that size.
func (c *checker) event(r row) {
	if !c.bridge(r.seq) {
		return
	}
	c.leaf = append(append(c.leaf[:0], 0), r.body...)
	before := len(c.report.Findings)
	if nodes := c.push(sha256.Sum256(c.leaf)); !c.bare && !samePacked(r.nodes, nodes) {
		c.find(r.seq, "does not fit its stored hashes")
	}
	h, err := parseRaw(r.body)
	switch {
	case err != nil:
		c.find(r.seq, "has no readable header")
	case h.seq != r.seq:
		c.find(r.seq, "carries the number %d", h.seq)
	default:
		c.words.add(h)
		c.key(r, h)
	}
	if c.edge.size%blockEvents == 0 {
		c.blocks = append(c.blocks, digestMentions(c.words.rows(c.edge.size/blockEvents-1)))
		c.words = newBlockWords()
	}
	c.replay(r, len(c.report.Findings) == before)
	c.heads(r.seq + 1)
}

// maxGap is the largest number of missing events that is bridged, so that what comes after
// them can still be judged. A row whose number is beyond that has a wrong number.
const maxGap = 10_000

// bridge steps over missing events. It is false when there is no use in going on.
func (c *checker) bridge(seq int64) bool {
	if c.lost {
		return false
	}
	if seq-c.edge.size > maxGap {
		c.find(c.edge.size, "is missing: the next one is number %d", seq)
		c.lost = true
		return false
	}
	for c.edge.size < seq {
		c.find(c.edge.size, "is missing")
		c.push(tlog.Hash{})
		c.halted = true
	}
	return true
}

func (c *checker) push(leaf tlog.Hash) []tlog.Hash {
	c.nodes = c.edge.push(leaf, c.nodes[:0])
	return c.nodes
}

// key follows the ledger's keys.
func (c *checker) key(r row, h rawHeader) {
	var err error
	switch {
	case r.seq == 0:
		c.keys, err = begin(r.body)
	case string(h.kind) == KindKeyChanged && c.keys != nil:
		c.keys, err = c.keys.change(r.seq, r.body)
	case string(h.kind) == KindCreated:
		err = altered(r.seq, "founds the ledger a second time")
	}
	if f := (*Finding)(nil); errors.As(err, &f) {
		c.find(f.Seq, "%s", f.What)
	}
}

// replay hands the event on until the first error.
func (c *checker) replay(r row, good bool) {
	if c.opt.Event == nil || c.halted {
		return
	}
	if !good {
		c.halted = true
		return
	}
	if err := c.opt.Event(Entry{r.seq, r.body}); err != nil {
		c.find(r.seq, "does not follow from the events before it: %v", err)
		c.halted = true
	}
}

// heads checks the checkpoints and the snapshot of the tree with size events.
func (c *checker) heads(size int64) {
	for len(c.stored) > 0 && c.stored[0].size <= size {
		c.storedHead(c.stored[0])
		c.stored = c.stored[1:]
	}
	for i := range c.outside {
		if o := &c.outside[i]; o.Size == size {
			c.outsideHead(o)
		}
	}
	if c.snap != nil && c.snap.Size == size {
		c.snapshot()
	}
}

func (c *checker) storedHead(n sizedNote) {
	if c.keys == nil {
		return
	}
	head, err := ReadCheckpoint(n.note, c.keys.newest())
	switch {
	case err != nil:
		c.find(-1, "the signature of the checkpoint of %d events is not good: %v", n.size, err)
	case head.Size != n.size || head.Size != c.edge.size:
		c.find(-1, "the checkpoint filed under %d events speaks of %d", n.size, head.Size)
	case head.Root != c.edge.root():
		c.find(-1, "the events before number %d do not fit the signed checkpoint", n.size)
	default:
		c.report.Checkpoints++
		c.report.Covered = n.size
	}
}

// outsideHead compares one checkpoint brought along with the recomputed tree. Its
// signature is judged with the key that came with it, when there is one.
func (c *checker) outsideHead(o *outsideHead) {
	o.reached = true
	var err error
	if c.keys == nil {
		return
	}
	if _, err = ReadCheckpoint(o.signed, c.keys.newest()); err != nil && c.opt.PublicKey != "" {
		_, err = ReadCheckpoint(o.signed, c.opt.PublicKey)
	}
	switch {
	case err != nil:
		c.find(-1, "the outside checkpoint of %d events has no good signature: %v", o.Size, err)
	case o.Root != c.edge.root():
		c.find(-1, "the events before number %d are not those of the outside checkpoint: history was rewritten", o.Size)
	default:
		c.report.Outside++
	}
}

func (c *checker) snapshot() {
	if c.keys == nil {
		return
	}
	if !c.keys.fits(*c.snap, c.signed, c.edge.root()) {
		c.find(-1, "the stored state of %d events does not fit its signature", c.snap.Size)
		return
	}
	if c.opt.Snapshot == nil || c.halted {
		return
	}
	if err := c.opt.Snapshot(*c.snap); err != nil {
		c.find(-1, "the stored state of %d events is not what they lead to: %v", c.snap.Size, err)
	}
}

// finish judges what is left over at the end, and the index.
func (c *checker) finish(ctx context.Context) error {
	c.conclude()
	return c.index(ctx)
}

// conclude judges what is left over at the end.
func (c *checker) conclude() {
	if c.edge.size == 0 {
		c.find(0, "is missing")
	}
	for _, n := range c.stored {
		c.find(c.edge.size, "is missing: a stored checkpoint speaks of %d events", n.size)
	}
	for _, o := range c.outside {
		if !o.reached {
			c.find(c.edge.size, "is missing: the outside checkpoint speaks of %d events", o.Size)
		}
	}
	if c.keys != nil && c.report.Checkpoints == 0 {
		c.find(-1, "no checkpoint with a good signature is left")
	}
	c.trust()
	c.report.Events, c.report.Root = c.edge.size, c.edge.root().String()
}

// trust connects the ledger's keys with the one that was brought along: the newest
// checkpoint has to be signed by that key or by one it handed over to.
func (c *checker) trust() {
	if c.keys == nil {
		return
	}
	c.report.Origin = originOf(c.keys[0].key)
	if c.opt.PublicKey == "" {
		return
	}
	place := c.keys.position(c.opt.PublicKey)
	if place < 0 || c.keys.at(c.report.Covered) < place {
		c.find(-1, "the ledger is not signed by the key given")
		return
	}
	c.report.Trusted = true
}

// index compares the stored index with the one that the events give. It may lag behind
// by whole blocks, but not differ.
func (c *checker) index(ctx context.Context) error {
	if err := c.s.enter(ctx); err != nil {
		return err
	}
	defer c.s.leave()
	rs, err := c.s.db.QueryContext(ctx, `SELECT word, block, seqs FROM mention ORDER BY block, word`)
	if err != nil {
		return c.broken("index", err)
	}
	defer rs.Close()
	var block int64
	var held []mention
	for rs.Next() {
		var m mention
		if err := rs.Scan(&m.word, &m.block, &m.seqs); err != nil {
			return c.broken("index", err)
		}
		if len(held) > 0 && held[0].block != m.block {
			c.indexBlock(block, held)
			block, held = block+1, held[:0]
		}
		held = append(held, m)
	}
	if len(held) > 0 {
		c.indexBlock(block, held)
	}
	return c.broken("index", rs.Err())
}

func (c *checker) indexBlock(block int64, rows []mention) {
	switch {
	case block >= int64(len(c.blocks)) && c.live:
	case block >= int64(len(c.blocks)):
		c.find(-1, "the index speaks of events that are not there")
	case rows[0].block != block || digestMentions(rows) != c.blocks[block]:
		c.find(-1, "the index of the events %d to %d is not what they give", block*blockEvents, (block+1)*blockEvents-1)
	}
}

// digestMentions hashes rows with their lengths.
func digestMentions(rows []mention) [sha256.Size]byte {
	var b bytes.Buffer
	for _, m := range rows {
		fmt.Fprintf(&b, "%d %d %q %x\n", m.block, len(m.seqs), m.word, m.seqs)
	}
	return sha256.Sum256(b.Bytes())
}
