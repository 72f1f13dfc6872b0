//go:build !unix

package broker

// lockFile does nothing where the system has no flock.
func lockFile(string) (unlock func(), err error) { return func() {}, nil }
