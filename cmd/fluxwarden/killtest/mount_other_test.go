//go:build unix && !linux

package killtest

import "errors"

func syscallMount(string) error { return errors.New("only on Linux") }

func syscallUnmount(string) error { return nil }
