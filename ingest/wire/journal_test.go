package wire

import (
	"encoding/binary"
	"encoding/hex"
	"errors"
	"hash/crc32"
	"math"
	"testing"

	"pgregory.net/rapid"

	"fluxwarden/qc/minute"
)

func someGroups(t *rapid.T) []Group {
	groups := make([]Group, rapid.IntRange(0, 4).Draw(t, "groups"))
	for i := range groups {
		groups[i] = Group{rapid.StringMatching(`[a-z0-9_-]{1,10}`).Draw(t, "station"), someReadings(t)}
		for k := range groups[i].Readings {
			r := &groups[i].Readings[k]
			r.Received = minute.Stamp(rapid.Int64().Draw(t, "received"))
			r.Ahead = rapid.Bool().Draw(t, "ahead")
		}
	}
	return groups
}

func sameGroups(a, b []Group) bool {
	if len(a) != len(b) {
		return false
	}
	for i := range a {
		if a[i].Station != b[i].Station || len(a[i].Readings) != len(b[i].Readings) {
			return false
		}
		for k := range a[i].Readings {
			if !sameReading(&a[i].Readings[k], &b[i].Readings[k]) {
				return false
			}
		}
	}
	return true
}

func TestAJournalFrameGivesBackWhatWasPutIn(t *testing.T) {
	rapid.Check(t, func(t *rapid.T) {
		want := someGroups(t)
		prefix := []byte("what was there before")
		got, err := DecodeJournal(AppendJournal(prefix, want)[len(prefix):])
		if err != nil || !sameGroups(got, want) {
			t.Fatalf("%v: got %+v, want %+v", err, got, want)
		}
	})
}

func goldenGroups() []Group {
	nan := math.NaN()
	return []Group{{"northmoor", []minute.Reading{
		{At: 1782043201_000000, Received: 1782043201_250000, Values: []minute.ChannelValue{{Channel: "g1_mv", Value: minute.Single(8.213)}}},
		{At: 1782043261_000000, Received: 1782043202_000000, Ahead: true, Values: []minute.ChannelValue{
			{Channel: "g1_mv", Value: minute.Value{Mean: 8, SD: 0.5, Min: nan, Max: nan, N: 60}}}},
	}}}
}

// goldenFrame is version 1 as it was first written. A journal on disk must stay readable: this never changes.
const goldenFrame = "01cc850b44010567315f6d7601096e6f7274686d6f6f720280c9c2bfc8b0aa06a08be1bfc8b0aa06000100931804560e6d2040809c9c39e0c65b" +
	"010101000000000000204001000000000000e03f3c"

func TestTheFirstVersionOfTheFrameStaysReadable(t *testing.T) {
	frame, err := hex.DecodeString(goldenFrame)
	if err != nil {
		t.Fatal(err)
	}
	if got := hex.EncodeToString(AppendJournal(nil, goldenGroups())); got != goldenFrame {
		t.Errorf("the frame is written as\n%s, want\n%s", got, goldenFrame)
	}
	if got, err := DecodeJournal(frame); err != nil || !sameGroups(got, goldenGroups()) {
		t.Errorf("%v: %+v", err, got)
	}
}

func TestADamagedFrameIsRefused(t *testing.T) {
	frame := AppendJournal(nil, goldenGroups())
	for i := range frame {
		if _, err := DecodeJournal(frame[:i]); !errors.Is(err, ErrJournal) {
			t.Errorf("cut to %d bytes: %v", i, err)
		}
		for bit := range 8 {
			damaged := append([]byte(nil), frame...)
			damaged[i] ^= 1 << bit
			if _, err := DecodeJournal(damaged); !errors.Is(err, ErrJournal) {
				t.Errorf("byte %d, bit %d: %v", i, bit, err)
			}
		}
	}
	if _, err := DecodeJournal(append(frame, 0)); !errors.Is(err, ErrJournal) {
		t.Errorf("a byte more: %v", err)
	}
}

// FuzzDecodeJournal mends the checksum, so that what is behind it is reached.
func FuzzDecodeJournal(f *testing.F) {
	f.Add(AppendJournal(nil, goldenGroups())[journalHeaderBytes:])
	f.Add([]byte{0, 0})
	f.Fuzz(func(t *testing.T, body []byte) {
		frame := append([]byte{JournalVersion, 0, 0, 0, 0}, body...)
		binary.LittleEndian.PutUint32(frame[1:], crc32.Checksum(body, castagnoli))
		groups, err := DecodeJournal(frame)
		if err != nil {
			if !errors.Is(err, ErrJournal) {
				t.Fatal(err)
			}
			return
		}
		again, err := DecodeJournal(AppendJournal(nil, groups))
		if err != nil || !sameGroups(again, groups) {
			t.Fatalf("what was read is not written back: %v", err)
		}
	})
}
