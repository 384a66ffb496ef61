package ledger

import (
	"path/filepath"

	"golang.org/x/sys/unix"
	"tenthmark/session"
)

// networkKinds are the file systems on which WAL or locks are not dependable, by the
// magic number that statfs(2) gives.
var networkKinds = map[uint32]string{
	0x6969:     "NFS",
	0x517b:     "SMB",
	0xff534d42: "CIFS",
	0xfe534d42: "SMB",
	0x65735546: "FUSE",
	0x01021997: "9P",
	0x5346414f: "AFS",
	0x00c36400: "Ceph",
	0x7461636f: "OCFS2",
	0x01161970: "GFS2",
}

// refuseNetwork keeps the ledger off shares, where locks and synced writes are promises
// that nobody keeps.
func refuseNetwork(path string) error {
	var st unix.Statfs_t
	if err := unix.Statfs(filepath.Dir(path), &st); err != nil {
		return explain("look at", filepath.Dir(path), err)
	}
	if kind := networkKinds[uint32(st.Type)]; kind != "" {
		return session.Refuse("ledger-network-folder", "The ledger "+path+" would be on a network or user-space file system ("+kind+").",
			"Put it on a disk of this computer; put the drop folder and the backups on the share.")
	}
	return nil
}
