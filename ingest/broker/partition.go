// Package broker runs the embedded NATS server or keeps a connection to an external one, and holds what fluxwarden
// keeps in it: the streams JOURNAL, REFUSED, CHANGES and FINDINGS, and the leases on partitions.
package broker

import (
	"fmt"
	"strconv"
	"strings"
)

// Partitions is the number of units of ownership. It is fixed for ever: the place of a station among them decides where
// its readings lie in every journal and in every commit record.
const Partitions = 64

const journalPrefix = "journal."

// PartitionOf is the partition of a station, 0..63: FNV-1a with 64 bits of its name, folded, modulo 64. (Fowler, Noll, Vo;
// constants of RFC 9923.) It never changes.
func PartitionOf(station string) int {
	h := uint64(14695981039346656037)
	for i := 0; i < len(station); i++ {
		h = (h ^ uint64(station[i])) * 1099511628211
	}
	h ^= h >> 32 // the low bits of FNV are its weakest
	h ^= h >> 16
	return int(h % Partitions)
}

// ChangeSubject is the subject of what people say of a partition's stations, in the stream CHANGES.
func ChangeSubject(partition int) string { return fmt.Sprintf("%s%02d", changesPrefix, partition) }

// JournalSubject is the subject of a partition's readings in the stream JOURNAL.
func JournalSubject(partition int) string { return fmt.Sprintf("%s%02d", journalPrefix, partition) }

// partitionOfSubject is the inverse of JournalSubject; false for any other subject.
func partitionOfSubject(subject string) (int, bool) {
	digits, ok := strings.CutPrefix(subject, journalPrefix)
	if !ok || len(digits) != 2 {
		return 0, false
	}
	p, err := strconv.Atoi(digits)
	return p, err == nil && p >= 0 && p < Partitions
}
