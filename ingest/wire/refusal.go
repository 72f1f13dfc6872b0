// Package wire turns what loggers send into readings and back: JSON messages, CSV files and the journal's own frames.
// Every decoder is strict, bounded in memory, and answers with a reason from a closed list.
package wire

import "fmt"

// Limits of one payload. A payload beyond one of them is refused with the reason beside it.
const (
	PayloadBytesMax     = 1 << 20 // too_large
	ReadingsMax         = 10_000  // in one payload: too_many_readings
	ChannelsMax         = 512     // in one reading: too_many_channels
	ChannelNameBytesMax = 64      // bad_channel; the name is made of a-z 0-9 _ . -
	DepthMax            = 16      // nested objects and arrays: too_deep; a sound reading needs four
	YearMin             = 1950    // bad_time
	YearMax             = 2100    // bad_time
	SamplesMax          = 1 << 30 // behind one averaged value: bad_value
)

// A Reason says why a payload, a reading or a line was refused. The list is closed: reasons are labels of a metric and
// headers of the stream REFUSED. New ones are appended, and none changes its meaning.
type Reason string

// The reasons. Those after the first group are given by the gate, which knows stations and clocks.
const (
	NotJSON         Reason = "not_json"
	TooLarge        Reason = "too_large"
	TooDeep         Reason = "too_deep"
	TooManyReadings Reason = "too_many_readings"
	TooManyChannels Reason = "too_many_channels"
	UnknownKey      Reason = "unknown_key"
	DuplicateKey    Reason = "duplicate_key"
	MissingKey      Reason = "missing_key"
	BadTime         Reason = "bad_time"
	BadValue        Reason = "bad_value"
	BadChannel      Reason = "bad_channel"
	BadFields       Reason = "bad_fields" // a CSV line with another number of fields than the header
	Truncated       Reason = "truncated"  // the last line of a file ends early
	LineTooLong     Reason = "line_too_long"

	UnknownStation Reason = "unknown_station"
	Ahead          Reason = "ahead"
	TooOld         Reason = "too_old"
	RateLimited    Reason = "rate_limited"
	InternalError  Reason = "internal_error"
)

// Reasons lists every reason, for metrics that want all of them at zero from the start.
var Reasons = []Reason{NotJSON, TooLarge, TooDeep, TooManyReadings, TooManyChannels, UnknownKey, DuplicateKey, MissingKey,
	BadTime, BadValue, BadChannel, BadFields, Truncated, LineTooLong, UnknownStation, Ahead, TooOld, RateLimited, InternalError}

// Whole is the Index of a refusal that concerns the whole payload.
const Whole = -1

// A Refusal says why a reading was not taken. It is an error.
type Refusal struct {
	Reason     Reason
	Detail     string // what was found and how to mend it; no longer than a line
	Index      int    // of the reading in the payload's array, or Whole
	Start, End int    // the bytes of the payload that it concerns
}

func (r *Refusal) Error() string {
	if r.Index == Whole {
		return fmt.Sprintf("payload: %s: %s", r.Reason, r.Detail)
	}
	return fmt.Sprintf("reading %d: %s: %s", r.Index, r.Reason, r.Detail)
}

// quoteMax is how much of a sender's text a detail repeats.
const quoteMax = 40

// quote shows a piece of input in a message: short, and with nothing that could break a log line.
func quote(b []byte) string {
	if len(b) > quoteMax {
		return fmt.Sprintf("%q...", b[:quoteMax])
	}
	return fmt.Sprintf("%q", b)
}

// validChannel says whether a channel name is one to 64 bytes of a-z 0-9 _ . -
func validChannel(name []byte) bool {
	if len(name) == 0 || len(name) > ChannelNameBytesMax {
		return false
	}
	for _, c := range name {
		if !channelByte[c] {
			return false
		}
	}
	return true
}

var channelByte = func() (t [256]bool) {
	for _, c := range "abcdefghijklmnopqrstuvwxyz0123456789_.-" {
		t[c] = true
	}
	return t
}()
