//go:build unix

package broker

import (
	"fmt"
	"io"
	"os"
	"strings"
	"syscall"
)

// lockFile takes a lock that ends with the process, and writes the process id into the file for whoever finds it taken.
func lockFile(path string) (unlock func(), err error) {
	f, err := os.OpenFile(path, os.O_RDWR|os.O_CREATE, 0o640)
	if err != nil {
		return nil, err
	}
	if err := syscall.Flock(int(f.Fd()), syscall.LOCK_EX|syscall.LOCK_NB); err != nil {
		holder, _ := io.ReadAll(io.LimitReader(f, 32))
		_ = f.Close()
		return nil, fmt.Errorf("in use by process %s: stop it, or name another directory", strings.TrimSpace(string(holder)))
	}
	if err := f.Truncate(0); err == nil {
		_, _ = f.WriteAt(fmt.Appendf(nil, "%d\n", os.Getpid()), 0)
	}
	return func() { _ = f.Close() }, nil
}
