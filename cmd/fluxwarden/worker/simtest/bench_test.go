package simtest

import (
	"context"
	"testing"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// BenchmarkLive takes readings of one station at 1 Hz, one a message, with ticks and commits as they fall, on an archive in memory.
func BenchmarkLive(b *testing.B) {
	w, err := newWorld(1, Options{Days: 1, Calm: true, Backend: memoryBackend})
	if err != nil {
		b.Fatal(err)
	}
	w.now = begin
	w.start(0)
	for _, p := range partitions {
		w.owner[p] = 0
	}
	for b.Loop() {
		w.now = w.now.Add(time.Second)
		r := minute.Reading{At: minute.Stamp(w.now.UnixMicro()), Received: minute.Stamp(w.now.UnixMicro()), Values: []minute.ChannelValue{
			{Channel: "ghi", Value: minute.Single(float64(w.now.Second()))}, {Channel: "dhi", Value: minute.Single(float64(w.now.Second() / 2))},
			{Channel: "ta_c", Value: minute.Single(17)}}}
		w.journal.append(partitionOf["anvil"], []wire.Group{{Station: "anvil", Readings: []minute.Reading{r}}}, nil)
		w.sync()
		for w.procs[0].w.Step(context.Background(), 0) {
		}
		w.journal.messages = w.journal.messages[:0]
	}
}
