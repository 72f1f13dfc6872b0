// Package killtest kills the real program while readings come in through a real broker connection, starts it again, and holds its archive
// against what was acknowledged. It confirms what the simulation of the worker proves: SIGKILL leaves the page cache alone, so
// that nothing is learnt of power cuts here.
package killtest
