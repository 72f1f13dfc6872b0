package worker

import (
	"context"
	"errors"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// ErrLost is what Archive.Commit answers when another worker has created the record first: the partition is no longer ours.
var ErrLost = errors.New("another worker has committed this partition")

// A Clock gives the time of day. Nothing in the worker waits by it.
type Clock interface{ Now() time.Time }

// A Position is how far a stream was read. Stream numbers can be used twice after a power cut, and start anew with a new
// stream: so a position holds only for the stream's creation time, and only where the message at Seq is still the one
// that was read.
type Position struct {
	Stream  string
	Created int64  // when the stream was made, ns since 1970
	Seq     uint64 // the last message read, 0 for none
	Stamp   int64  // when the broker stored that message, ns since 1970; 0 where it is not known
}

// StreamState is what the broker says of the journal.
type StreamState struct {
	Stream      string
	Created     int64 // ns since 1970
	First, Last uint64
	Bytes       uint64
}

// A Delivery is one message of the journal.
type Delivery struct {
	Seq       uint64
	Stamp     int64 // when the broker stored it, ns since 1970
	Partition int
	Groups    []wire.Group
	Bad       error  // why the message cannot be read; Groups is empty then
	Payload   []byte // of a message that cannot be read
}

// A Journal is the stream of acknowledged readings.
type Journal interface {
	State(ctx context.Context) (StreamState, error)
	// StampOf gives the time at which the message was stored; false where there is none under this number.
	StampOf(ctx context.Context, seq uint64) (int64, bool, error)
	// Open reads the partitions' messages in order, from the first whose number is at least from.
	Open(ctx context.Context, partitions []int, from uint64) (Cursor, error)
	// Purge forgets the messages, of every partition, that are numbered up to and with seq and were stored before the time.
	Purge(ctx context.Context, seq uint64, before time.Time) error
}

// A Cursor gives messages in the order of their numbers. After an error it is of no more use.
type Cursor interface {
	// Next gives the next message, or false when none came within the wait.
	Next(ctx context.Context, wait time.Duration) (Delivery, bool, error)
	// Pending is how many messages are known to wait behind the last one given.
	Pending() uint64
	Close()
}

// ChangesStream is the name under which commit records keep how far the stream of notes was read.
const ChangesStream = "CHANGES"

// Changes is the stream of what people say: the notes that the daemon was given.
type Changes interface {
	State(ctx context.Context) (StreamState, error)
	StampOf(ctx context.Context, seq uint64) (int64, bool, error)
	// Read gives messages in order, from the first whose number is at least from, as many as it likes; none where there are no more.
	Read(ctx context.Context, from uint64) ([]Change, error)
	// Purge forgets messages up to and with seq.
	Purge(ctx context.Context, seq uint64) error
}

// A Change is one message of Changes.
type Change struct {
	Seq       uint64
	Stamp     int64 // when the broker stored it, ns since 1970
	Partition int
	Note      rules.Note
	Bad       error  // why the message cannot be read
	Payload   []byte // as it came
}

// A Lease says which partitions this worker should work on now, with the epoch of each. It only advises: the archive decides.
type Lease interface {
	Owned(ctx context.Context, now time.Time) (map[int]uint64, error)
}

// An Archive keeps what was committed. A commit is taken whole or not at all.
type Archive interface {
	// Last gives the number of the partition's last commit, 0 for none, and its positions.
	Last(partition int) (uint64, []Position, error)
	// Commit creates the record Base+1. It answers ErrLost where somebody else has.
	Commit(c *Commit) (uint64, error)
	// ReadRaw gives every value kept for the station's days [from, to].
	ReadRaw(station string, from, to int64, each func(*minute.Batch) error) error
	Summaries(station string, from, to int64) ([]engine.DaySummary, error)
	Faults(station string) ([]fault.Episode, error)
	// Notes gives all notes of a station, withdrawn ones and withdrawals among them.
	Notes(station string) ([]rules.Note, error)
	// Owed lists the days of the partition's stations that the last commit left to be judged once more.
	Owed(partition int) ([]store.Owed, error)
	// Compact makes one file of a station's month, YYYY-MM, after the record base, and gives the record it made; base where there was
	// nothing to do.
	Compact(partition int, base uint64, station, month string) (uint64, error)
	// DropRaw takes the files of readings that lie wholly before the day out of the archive for good, after the record base, and gives the
	// record it made; base where there was nothing to do.
	DropRaw(partition int, base uint64, station string, before int64) (uint64, error)
}

// A Commit is what is written together.
type Commit struct {
	Partition   int
	Base        uint64 // the record that it follows
	Epoch       uint64
	Positions   []Position
	RulesDigest string
	Program     string
	Time        time.Time // when it was made
	Raw         []RawPart
	Days        []Day
	Faults      []StationFaults
	Summaries   []engine.DaySummary
	Notes       []rules.Note
	DayReasons  []store.DayReason // why days change that had been judged before
	Owed        []store.Owed      // days that are still to be judged once more: all of the partition
}

// Empty says whether the commit would carry positions only.
func (c *Commit) Empty() bool {
	return len(c.Raw) == 0 && len(c.Days) == 0 && len(c.Faults) == 0 && len(c.Summaries) == 0 && len(c.Notes) == 0
}

// A RawPart is readings of one station whose minutes belong to one UTC day.
type RawPart struct {
	Day   int64
	Batch *minute.Batch
}

// A Day is a day's judged minutes, with the plan that judged them.
type Day struct {
	Judged *engine.Judged
	Sealed bool // complete, and late readings are no longer awaited
}

// StationFaults is all episodes of a station.
type StationFaults struct {
	Station  string
	Episodes []fault.Episode
}

// Rules gives the plan that holds for a station on a UTC day, nil for a station that is not declared, and the digest of
// the newest rules it knows.
type Rules interface {
	PlanFor(station string, day int64) *engine.Plan
	Digest() string
	// Stations lists the declared stations of a partition.
	Stations(partition int) []string
}

// A Finding is a change to an episode.
type Finding struct {
	Episode   fault.Episode
	Withdrawn bool // later readings have taken the ground from it: it is no more
}

// Findings publishes changes to episodes. What it returns is counted; the worker goes on.
type Findings interface {
	Publish(ctx context.Context, changes []Finding) error
}

// An Aside keeps what could not be judged where a person will see it.
type Aside interface {
	SetAside(ctx context.Context, reason string, station string, readings []minute.Reading, payload []byte, detail string) error
}

// Live is told of judged minutes as they come about: [from, to) of the day, settled by what is known now. It must not keep
// or change the Judged.
type Live interface {
	Minutes(j *engine.Judged, from, to int)
	Episodes(station string, episodes []fault.Episode)
}

// A Meter counts.
type Meter interface {
	Readings(station string, n int)
	Duplicates(n int)
	Late(station string, n int)
	LastMinute(station string, at time.Time)
	Committed(took time.Duration, rows int, err error)
	DayJudgedAgain(station string)
	JournalGap(reason string)
	Journal(state StreamState, pending uint64)
	SetAside(reason string, n int)
	Failed(operation string)
	Owned(partitions int)
	Noted(n int)
	Waiting(b Backlog)
}

// A Backlog is what waits to be written or sealed.
type Backlog struct {
	UncommittedSince time.Time // the longest that a partition with readings has waited for a commit; zero if none waits
	UnsealedDays     int       // station-days
	OldestUnsealed   time.Time // begin of the oldest of them; zero if there is none
	Owed             int       // station-days to be judged once more
}

// Reasons under which a Meter counts a journal that is not the one that was read before.
const (
	GapPurged   = "purged"   // messages that were never committed are gone
	GapRecreate = "recreate" // the stream was made anew
	GapReused   = "reused"   // numbers were given twice
)

// ReasonPanic and ReasonUnreadable are why the worker itself sets something aside.
const (
	ReasonPanic      = "panic"
	ReasonUnreadable = "unreadable"
	ReasonNote       = "note" // a note that is about nothing the site has, or is not whole
)
