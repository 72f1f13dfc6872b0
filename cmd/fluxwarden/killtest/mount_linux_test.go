package killtest

import "golang.org/x/sys/unix"

func syscallMount(dir string) error { return unix.Mount("tmpfs", dir, "tmpfs", 0, "size=24m") }

func syscallUnmount(dir string) error { return unix.Unmount(dir, unix.MNT_DETACH) }
