package journal

import "golang.org/x/sys/unix"

// freeBytes is what an ordinary user may still write where a folder is.
func freeBytes(dir string) (int64, error) {
	var s unix.Statfs_t
	if err := unix.Statfs(dir, &s); err != nil {
		return 0, err
	}
	return int64(s.Bavail) * s.Bsize, nil
}
