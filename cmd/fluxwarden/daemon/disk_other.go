//go:build !unix

package daemon

import "errors"

func diskFree(string) (uint64, error) { return 0, errors.New("free space is not known on this system") }
