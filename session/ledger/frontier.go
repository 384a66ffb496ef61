package ledger

import (
	"bytes"
	"crypto/sha256"

	"golang.org/x/mod/sumdb/tlog"
)

// frontier is the right edge of the Merkle tree: the roots of its complete
// subtrees, largest first. It is all one needs to go on appending and to know
// the root; for a million events it holds at most 20 hashes.
type frontier struct {
	size   int64
	hashes []tlog.Hash
}

// push appends a leaf. It gives the hashes to store with the event, the leaf's own
// first and then each subtree that it completes, appended to into.
func (f *frontier) push(leaf tlog.Hash, into []tlog.Hash) []tlog.Hash {
	h := leaf
	into = append(into, h)
	for n := f.size; n&1 == 1; n >>= 1 {
		last := len(f.hashes) - 1
		h = tlog.NodeHash(f.hashes[last], h)
		f.hashes = f.hashes[:last]
		into = append(into, h)
	}
	f.hashes = append(f.hashes, h)
	f.size++
	return into
}

// root gives the root of the tree, SHA-256 of nothing for the empty one (RFC 6962
// section 2.1).
func (f *frontier) root() tlog.Hash {
	if f.size == 0 {
		return sha256.Sum256(nil)
	}
	h := f.hashes[len(f.hashes)-1]
	for i := len(f.hashes) - 2; i >= 0; i-- {
		h = tlog.NodeHash(f.hashes[i], h)
	}
	return h
}

// clone gives a copy that can be advanced without touching f.
func (f *frontier) clone() frontier {
	return frontier{size: f.size, hashes: append(make([]tlog.Hash, 0, len(f.hashes)+8), f.hashes...)}
}

// packHashes puts hashes one after another, the form of the column event.nodes.
func packHashes(hashes []tlog.Hash) []byte {
	packed := make([]byte, 0, len(hashes)*tlog.HashSize)
	for _, h := range hashes {
		packed = append(packed, h[:]...)
	}
	return packed
}

// samePacked says whether packed is exactly hashes.
func samePacked(packed []byte, hashes []tlog.Hash) bool {
	if len(packed) != len(hashes)*tlog.HashSize {
		return false
	}
	for i := range hashes {
		if !bytes.Equal(packed[i*tlog.HashSize:(i+1)*tlog.HashSize], hashes[i][:]) {
			return false
		}
	}
	return true
}

// keeper gives the event whose row holds the node (level, n), the level being its
// place in the row: a subtree is complete with its last leaf.
func keeper(level int, n int64) (seq int64) { return (n+1)<<uint(level) - 1 }
