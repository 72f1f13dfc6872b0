// Package gate is the front door: it takes readings as NATS requests, knows who may speak and how much, writes them to the
// journal in groups, and answers a sender when its readings are on disk.
package gate

import (
	"log/slog"
	"time"

	"fluxwarden/ingest/wire"
)

// Subjects: a station's readings come on SubjectPrefix and its name.
const (
	SubjectPrefix = "rad.v1."
	queueGroup    = "gate"
)

// Settings say what the gate lets in. Zero values of the limits stand for their defaults.
type Settings struct {
	Known   func(station string) bool // needed; see also SetKnown
	Now     func() time.Time          // needed
	DiskLow func() bool               // asked before every flush; true: nothing is taken. Optional
	NoClock func() bool               // likewise, while the clock is not set: a receive time is kept with each reading. Optional
	Meter   Meter                     // optional
	// Clock is told how far the newest stamp of a payload is ahead of its receipt, negative where it is behind. It must not wait. Optional.
	Clock func(station string, ahead time.Duration)
	Log   *slog.Logger // optional

	AheadMark time.Duration // a stamp further ahead of receipt is marked; 2 min
	AheadMax  time.Duration // and beyond this refused; 26 h
	AgeMax    time.Duration // an older stamp is refused; 31 days

	RatePerSecond float64 // readings of one station, sustained; 200
	RateBurst     float64 // readings that it may catch up at once; 20,000

	Linger        time.Duration // how long a flush collects; 20 ms
	FlushBytes    int           // or up to so many bytes of payload; 1 MiB
	FlushMessages int           // or up to so many payloads; 1024
	AckWait       time.Duration // for the broker to store a flush; 10 s

	StationMessagesMax int // waiting, of one station; 2048
	StationBytesMax    int // waiting, of one station; 4 MiB
	PendingBytesMax    int // waiting, of all; 64 MiB

	RefusedPerSecond float64 // payloads of one station that are kept in REFUSED, sustained; 10
	RefusedBurst     float64 // and at once; 500
}

func (s Settings) withDefaults() Settings {
	orDuration(&s.AheadMark, 2*time.Minute)
	orDuration(&s.AheadMax, 26*time.Hour)
	orDuration(&s.AgeMax, 31*24*time.Hour)
	orDuration(&s.Linger, 20*time.Millisecond)
	orDuration(&s.AckWait, 10*time.Second)
	orNumber(&s.RatePerSecond, 200)
	orNumber(&s.RateBurst, 20_000)
	orNumber(&s.RefusedPerSecond, 10)
	orNumber(&s.RefusedBurst, 500)
	orNumber(&s.FlushBytes, 1<<20)
	orNumber(&s.FlushMessages, 1024)
	orNumber(&s.StationMessagesMax, 2048)
	orNumber(&s.StationBytesMax, 4<<20)
	orNumber(&s.PendingBytesMax, 64<<20)
	if s.Meter == nil {
		s.Meter = &Counters{}
	}
	if s.Log == nil {
		s.Log = slog.New(slog.DiscardHandler)
	}
	return s
}

func orDuration(v *time.Duration, instead time.Duration) {
	if *v <= 0 {
		*v = instead
	}
}

func orNumber[T int | float64](v *T, instead T) {
	if *v <= 0 {
		*v = instead
	}
}

// A Reply is the answer to one payload, sent as JSON.
type Reply struct {
	OK      bool        `json:"ok"`                // everything in the payload is on disk
	N       int         `json:"n"`                 // readings of it that are on disk
	Retry   bool        `json:"retry,omitempty"`   // nothing is wrong with it, and nothing of it was taken: send it again later
	Reason  RetryReason `json:"reason,omitempty"`  // why later
	Refused []Refused   `json:"refused,omitempty"` // readings that are wrong: sending them again does not help
	More    int         `json:"more,omitempty"`    // refused readings that are not listed
}

// Refused is one refusal in a reply.
type Refused struct {
	Index  int         `json:"index"` // of the reading in the payload, -1 for the whole payload
	Reason wire.Reason `json:"reason"`
	Detail string      `json:"detail"`
}

const refusedListedMax = 100

// A RetryReason says why a sender is asked to come again. The list is closed.
type RetryReason string

// The reasons to come again.
const (
	Busy         RetryReason = "busy"         // too much of this station is waiting
	TooFast      RetryReason = "rate_limited" // over the station's rate
	JournalFull  RetryReason = "journal_full"
	BrokerAway   RetryReason = "broker_away" // it did not say in time that the readings are on disk
	DiskIsLow    RetryReason = "disk_low"
	ShuttingDown RetryReason = "shutting_down"
	ClockUnset   RetryReason = "clock_unset"
)

// RetryReasons lists them all.
var RetryReasons = []RetryReason{Busy, TooFast, JournalFull, BrokerAway, DiskIsLow, ShuttingDown, ClockUnset}
