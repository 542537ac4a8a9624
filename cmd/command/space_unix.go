//go:build linux || darwin

package command

import "golang.org/x/sys/unix"

// freeSpace returns how many bytes may be written where a folder is, and whether that is known.
func freeSpace(folder string) (int64, bool) {
	var s unix.Statfs_t
	if err := unix.Statfs(folder, &s); err != nil {
		return 0, false
	}
	return int64(s.Bavail) * int64(s.Bsize), true
}
