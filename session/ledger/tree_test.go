package ledger

import (
	"bytes"
	"fmt"
	"testing"

	"github.com/transparency-dev/merkle/compact"
	"github.com/transparency-dev/merkle/proof"
	"github.com/transparency-dev/merkle/rfc6962"
	"golang.org/x/mod/sumdb/tlog"
	"pgregory.net/rapid"
)

// TestPublishedTree checks the hashes against the reference tree that accompanies the
// Certificate Transparency log of RFC 6962: eight leaves and the root after each
// (the inputs and roots are those of the test data of google/certificate-transparency,
// written down from memory and confirmed by the second implementation used below).
func TestPublishedTree(t *testing.T) {
	leaves := [][]byte{
		{},
		{0x00},
		{0x10},
		{0x20, 0x21},
		{0x30, 0x31},
		{0x40, 0x41, 0x42, 0x43},
		{0x50, 0x51, 0x52, 0x53, 0x54, 0x55, 0x56, 0x57},
		{0x60, 0x61, 0x62, 0x63, 0x64, 0x65, 0x66, 0x67, 0x68, 0x69, 0x6a, 0x6b, 0x6c, 0x6d, 0x6e, 0x6f},
	}
	roots := []string{
		"6e340b9cffb37a989ca544e6bb780a2c78901d3fb33738768511a30617afa01d",
		"fac54203e7cc696cf0dfcb42c92a1d9dbaf70ad9e621f4bd8d98662f00e3c125",
		"aeb6bcfe274b70a14fb067a5e5578264db0fa9b51af5e0ba159158f329e06e77",
		"d37ee418976dd95753c1c73862b9398fa2a2cf9b4ff0fdfe8b30cd95209614b7",
		"4e3bbb1f7b478dcfe71fb631631519a3bca12c9aefca1612bfce4c13a86264d4",
		"76e67dadbcdf1e10e1b74ddc608abd2f98dfb16fbce75277b5232a127f2087ef",
		"ddb89be403809e325750d3d263cd78929c2942b7942a34b77e122c9594a74c8c",
		"5dc9da79a70659a9ad559cb701ded9a2ab9d823aad2f4960cfe370eff4604328",
	}
	var f frontier
	for i, leaf := range leaves {
		f.push(tlog.RecordHash(leaf), nil)
		root := f.root()
		if got := fmt.Sprintf("%x", root[:]); got != roots[i] {
			t.Errorf("root of %d leaves: %s, want %s", i+1, got, roots[i])
		}
	}
	empty := (&frontier{}).root()
	if got := fmt.Sprintf("%x", empty[:]); got != "e3b0c44298fc1c149afbf4c8996fb92427ae41e4649b934ca495991b7852b855" {
		t.Errorf("root of nothing: %s, want SHA-256 of nothing (FIPS 180-4)", got)
	}
}

// TestSecondOpinion lets an independent implementation (transparency-dev/merkle) compute
// the same roots and accept our proofs.
func TestSecondOpinion(t *testing.T) {
	l := open(t, found(t, t.TempDir()))
	mustAppend(t, l, plains(299)...)
	other := (&compact.RangeFactory{Hash: rfc6962.DefaultHasher.HashChildren}).NewEmptyRange(0)
	var roots, leaves [][]byte
	if err := l.Replay(t.Context(), 0, func(e Entry) error {
		leaf := rfc6962.DefaultHasher.HashLeaf(e.Body)
		if err := other.Append(leaf, nil); err != nil {
			return err
		}
		root, err := other.GetRootHash(nil)
		roots, leaves = append(roots, root), append(leaves, leaf)
		return err
	}); err != nil {
		t.Fatal(err)
	}
	ours := l.edge.root()
	if !bytes.Equal(ours[:], roots[len(roots)-1]) {
		t.Fatalf("root %x, the other says %x", ours, roots[len(roots)-1])
	}
	size := l.Size()
	for seq := int64(0); seq < size; seq += 7 {
		path, err := l.Prove(t.Context(), seq, size)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.VerifyInclusion(rfc6962.DefaultHasher, uint64(seq), uint64(size), leaves[seq], raw(path), roots[size-1]); err != nil {
			t.Errorf("inclusion of %d: %v", seq, err)
		}
	}
	for older := int64(1); older <= size; older += 13 {
		path, err := l.ProveGrowth(t.Context(), older, size)
		if err != nil {
			t.Fatal(err)
		}
		if err := proof.VerifyConsistency(rfc6962.DefaultHasher, uint64(older), uint64(size), raw(path), roots[older-1], roots[size-1]); err != nil {
			t.Errorf("growth from %d: %v", older, err)
		}
	}
}

func raw(path []tlog.Hash) [][]byte {
	out := make([][]byte, len(path))
	for i := range path {
		out[i] = path[i][:]
	}
	return out
}

// TestFrontierIsTlog compares the hashes that we store with those of the tlog package.
func TestFrontierIsTlog(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		var f frontier
		var stored []tlog.Hash
		reader := tlog.HashReaderFunc(func(indexes []int64) ([]tlog.Hash, error) {
			out := make([]tlog.Hash, len(indexes))
			for i, index := range indexes {
				out[i] = stored[index]
			}
			return out, nil
		})
		for n := range rapid.Int64Range(1, 200).Draw(t, "events") {
			leaf := tlog.RecordHash(rapid.SliceOfN(rapid.Byte(), 0, 4).Draw(t, "body"))
			want, err := tlog.StoredHashesForRecordHash(n, leaf, reader)
			if err != nil {
				t.Fatal(err)
			}
			if got := f.push(leaf, nil); !samePacked(packHashes(got), want) {
				t.Fatalf("event %d stores %v, want %v", n, got, want)
			}
			stored = append(stored, want...)
			root, err := tlog.TreeHash(n+1, reader)
			if err != nil || root != f.root() {
				t.Fatalf("root of %d: %v, want %v (%v)", n+1, f.root(), root, err)
			}
		}
	})
}
