//go:build unix

package field

import (
	"fmt"
	"io/fs"
	"syscall"
)

// fileID tells a file from another under the same name.
func fileID(info fs.FileInfo) string {
	if s, ok := info.Sys().(*syscall.Stat_t); ok {
		return fmt.Sprintf("%d:%d", s.Dev, s.Ino)
	}
	return ""
}
