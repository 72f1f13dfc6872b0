//go:build unix

package daemon

import "golang.org/x/sys/unix"

// diskFree is how many bytes an ordinary user may still write where the directory lies.
func diskFree(dir string) (uint64, error) {
	var st unix.Statfs_t
	if err := unix.Statfs(dir, &st); err != nil {
		return 0, err
	}
	return uint64(st.Bavail) * uint64(st.Bsize), nil
}
