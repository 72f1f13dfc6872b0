// Package notify tells people of faults by webhook and mail, for sites that run no alerting of their own.
//
// A message is due when an episode with severity act is raised, changes its kind, ends or is withdrawn. Each is known by its key,
// the episode's id and revision and what happened, and goes out once on each way, also across restarts: what was sent is kept in a log that is synced before the
// next one. A crash between sending and noting can repeat one message; its key then stands in the repeat, so that a receiver can drop it.
package notify

import (
	"context"
	"errors"
	"fmt"
	"log/slog"
	"maps"
	"slices"
	"sync"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// What a message tells.
const (
	Raised    = "raised"
	Changed   = "changed" // another kind or instrument
	Ended     = "ended"
	Withdrawn = "withdrawn" // later readings took the ground from it
	Sheet     = "sheet"     // the morning's
)

// A Message is what goes out. Key is the same for every repeat of one message.
type Message struct {
	Key        string     `json:"key"`
	Event      string     `json:"event"`
	Network    string     `json:"network"`
	Station    string     `json:"station,omitempty"`
	Instrument string     `json:"instrument,omitempty"`
	Kind       string     `json:"kind,omitempty"`
	ID         string     `json:"id,omitempty"`
	Rev        int        `json:"rev,omitempty"`
	From       *time.Time `json:"from,omitempty"`
	To         *time.Time `json:"to,omitempty"`
	Subject    string     `json:"subject"`
	Text       string     `json:"text"`
}

// A Way is one way on which messages go out. Send returns a *Final where trying again is of no use.
type Way interface {
	Name() string
	Send(ctx context.Context, m *Message) error
}

// A Final is a refusal that trying again does not mend.
type Final struct{ Err error }

func (f *Final) Error() string { return f.Err.Error() }
func (f *Final) Unwrap() error { return f.Err }

// A Config is what a notifier stands on. All but Log must be given.
type Config struct {
	Network  string
	Ways     []Way
	LogFile  string // what was sent
	Quiet    Quiet
	Morning  Morning
	Now      func() time.Time // the daemon's clock
	CaughtUp func() bool      // no message goes out while the journal is being read: what is read may change what is known
	Sheet    func() string    // the text of the morning sheet
	Meter    Meter
	Log      *slog.Logger
	// Backoff is the wait after the first failed try; it doubles up to BackoffMax. After Tries in vain a message is given up.
	Backoff, BackoffMax time.Duration
	Tries               int
	SendWithin          time.Duration // bounds one try, so that a receiver that hangs holds nobody
	Settle              time.Duration // how long, by the wall clock, a change must stand before it is told
}

// A Meter counts.
type Meter interface {
	Notified(way string)
	NotifyFailed(way string, forGood bool)
	NotifyWaiting(n int)
}

// Defaults of a Config.
const (
	BackoffDefault    = 2 * time.Second
	BackoffMaxDefault = 5 * time.Minute
	TriesDefault      = 12 // over about half an hour
	SettleDefault     = 5 * time.Second
	SendWithinDefault = 15 * time.Second
)

// oldNews is how long ago an episode may have ended and still be told of when nothing was told of it before.
const oldNews = 24 * time.Hour

// A Notifier takes the stations' episodes and tells of what is due.
type Notifier struct {
	cfg  Config
	log  *slog.Logger
	sent *sentLog

	mu       sync.Mutex
	stations map[string]known // what is known of each station's episodes
	poke     chan struct{}
	done     sync.WaitGroup
	cancel   context.CancelFunc
}

type known struct {
	episodes  map[string]fault.Episode
	suspected []fault.Episode
	changed   time.Time // by the wall clock
}

// Start opens the log of what was sent and begins to tell.
func Start(cfg Config) (*Notifier, error) {
	if cfg.Backoff <= 0 {
		cfg.Backoff = BackoffDefault
	}
	if cfg.BackoffMax <= 0 {
		cfg.BackoffMax = BackoffMaxDefault
	}
	if cfg.Tries <= 0 {
		cfg.Tries = TriesDefault
	}
	if cfg.SendWithin <= 0 {
		cfg.SendWithin = SendWithinDefault
	}
	if cfg.Log == nil {
		cfg.Log = slog.New(slog.DiscardHandler)
	}
	sent, err := openSentLog(cfg.LogFile)
	if err != nil {
		return nil, err
	}
	n := &Notifier{cfg: cfg, log: cfg.Log, sent: sent, stations: map[string]known{}, poke: make(chan struct{}, 1)}
	ctx, cancel := context.WithCancel(context.Background())
	n.cancel = cancel
	for _, w := range cfg.Ways {
		n.done.Go(func() { n.run(ctx, w) })
	}
	return n, nil
}

// Stop ends telling; what is due stays due for the next start.
func (n *Notifier) Stop() error {
	n.cancel()
	n.done.Wait()
	return n.sent.close()
}

// Episodes takes all episodes of a station, as they are known now. It keeps none of the slice.
func (n *Notifier) Episodes(station string, all []fault.Episode) {
	k := known{episodes: make(map[string]fault.Episode, len(all)), changed: time.Now()}
	for _, e := range all {
		if e.Severity == rules.Act {
			k.episodes[e.ID] = e
		} else if e.To == fault.Open {
			k.suspected = append(k.suspected, e)
		}
	}
	n.mu.Lock()
	n.stations[station] = k
	n.mu.Unlock()
	select {
	case n.poke <- struct{}{}:
	default:
	}
}

// lookEvery is how often a way looks for what is due when nothing new is heard.
const lookEvery = time.Second

func (n *Notifier) run(ctx context.Context, w Way) {
	timer := time.NewTicker(lookEvery)
	defer timer.Stop()
	tries := map[string]int{}
	for ctx.Err() == nil {
		for _, m := range n.due(w.Name()) {
			if ctx.Err() != nil {
				return
			}
			if !n.deliver(ctx, w, &m, tries) {
				break // in order: the next waits for this one
			}
		}
		select {
		case <-ctx.Done():
		case <-timer.C:
		case <-n.poke:
		}
	}
}

// deliver sends one message and notes it. It says false where it must be tried again.
func (n *Notifier) deliver(ctx context.Context, w Way, m *Message, tries map[string]int) bool {
	once, cancel := context.WithTimeout(ctx, n.cfg.SendWithin)
	err := w.Send(once, m)
	cancel()
	if ctx.Err() != nil && err != nil {
		return false
	}
	if err == nil {
		n.note(w.Name(), m, "")
		n.cfg.Meter.Notified(w.Name())
		delete(tries, m.Key)
		return true
	}
	tries[m.Key]++
	var final *Final
	forGood := errors.As(err, &final) || tries[m.Key] >= n.cfg.Tries
	n.cfg.Meter.NotifyFailed(w.Name(), forGood)
	if forGood {
		n.log.Error("a message is given up", "way", w.Name(), "message", m.Key, "tries", tries[m.Key], "cause", err)
		n.note(w.Name(), m, err.Error())
		delete(tries, m.Key)
		return true
	}
	wait := min(n.cfg.Backoff<<(min(tries[m.Key], 20)-1), n.cfg.BackoffMax)
	n.log.Warn("a message does not go out; it is tried again", "way", w.Name(), "message", m.Key, "in", wait, "cause", err)
	timer := time.NewTimer(wait)
	defer timer.Stop()
	select {
	case <-ctx.Done():
	case <-timer.C:
	}
	return false
}

func (n *Notifier) note(way string, m *Message, givenUp string) {
	if err := n.sent.add(sentLine{Way: way, Key: m.Key, Event: m.Event, ID: m.ID, Rev: m.Rev, Kind: m.Kind, Instrument: m.Instrument, Station: m.Station,
		At: n.cfg.Now().UTC(), GivenUp: givenUp}); err != nil {
		n.log.Error("what was sent is not noted; it may be sent again after a restart", "cause", err)
	}
}

// due lists what a way has to tell now, in the order of the episodes.
func (n *Notifier) due(way string) []Message {
	now := n.cfg.Now()
	if !n.cfg.CaughtUp() {
		return nil
	}
	var all []Message
	n.mu.Lock()
	for _, station := range slices.Sorted(maps.Keys(n.stations)) {
		k := n.stations[station]
		if time.Since(k.changed) < n.cfg.Settle {
			continue
		}
		all = append(all, n.dueOf(way, station, k, now)...)
	}
	n.mu.Unlock()
	quiet := n.cfg.Quiet.Holds(now)
	if day, ok := n.cfg.Morning.Due(now); ok && n.sent.last(way, "sheet-"+day) == nil {
		all = append(all, Message{Key: "sheet-" + day, Event: Sheet, Network: n.cfg.Network, ID: "sheet-" + day, Subject: fmt.Sprintf("%s: morning sheet of %s", n.cfg.Network, day), Text: n.cfg.Sheet()})
	}
	n.cfg.Meter.NotifyWaiting(len(all))
	if quiet {
		return nil
	}
	return all
}

// dueOf compares what is known of a station with what was told.
func (n *Notifier) dueOf(way, station string, k known, now time.Time) []Message {
	var all []Message
	episodes := slices.SortedFunc(maps.Values(k.episodes), func(a, b fault.Episode) int {
		if a.Raised != b.Raised {
			return int(a.Raised - b.Raised)
		}
		if a.ID < b.ID {
			return -1
		}
		return 1
	})
	for i := range episodes {
		e := &episodes[i]
		told := n.sent.last(way, e.ID)
		open := e.To == fault.Open
		event := ""
		switch {
		case told == nil && open:
			event = Raised
		case told == nil && now.Sub(time.Unix(60*e.To, 0)) < oldNews:
			event = Ended // raised and over before anything was told of it: one message
		case told == nil || told.Event == Ended && !open:
		case !open:
			event = Ended
		case told.Event == Ended || told.Event == Withdrawn || told.Kind != e.Kind.String() || told.Instrument != e.Instrument:
			event = Changed
		}
		if event == "" || told != nil && told.Rev == e.Rev && told.Event == event {
			continue
		}
		all = append(all, n.message(event, e))
	}
	for _, told := range n.sent.open(way, station) {
		if _, ok := k.episodes[told.ID]; !ok {
			e := told
			all = append(all, Message{Key: fmt.Sprintf("%s/%d/%s", e.ID, e.Rev, Withdrawn), Event: Withdrawn, Network: n.cfg.Network, Station: station, Instrument: e.Instrument,
				Kind: e.Kind, ID: e.ID, Rev: e.Rev, Subject: fmt.Sprintf("%s %s: %s was none", station, e.Instrument, e.Kind), Text: "Later readings have taken the ground from it: there was no such fault."})
		}
	}
	return all
}

// message puts an episode into words.
func (n *Notifier) message(event string, e *fault.Episode) Message {
	at := func(m int64) *time.Time { t := time.Unix(60*m, 0).UTC(); return &t }
	m := Message{Key: fmt.Sprintf("%s/%d/%s", e.ID, e.Rev, event), Event: event, Network: n.cfg.Network, Station: e.Station, Instrument: e.Instrument, Kind: e.Kind.String(),
		ID: e.ID, Rev: e.Rev, From: at(e.From)}
	title, since := e.Kind.Entry().Title, m.From.Format("2006-01-02 15:04Z")
	if e.To != fault.Open {
		m.To = at(e.To)
		m.Subject = fmt.Sprintf("%s %s: %s is over", e.Station, e.Instrument, title)
		m.Text = fmt.Sprintf("%s of %s: %s, from %s to %s.\n", e.Instrument, e.Station, title, since, m.To.Format("2006-01-02 15:04Z"))
		return m
	}
	m.Subject = fmt.Sprintf("%s %s: %s", e.Station, e.Instrument, title)
	m.Text = fmt.Sprintf("%s of %s: %s since %s, %.0f %% sure.\n", e.Instrument, e.Station, title, since, 100*e.Confidence)
	for _, also := range e.Also {
		m.Text += fmt.Sprintf("It may also be: %s.\n", also.Entry().Title)
	}
	for _, ev := range e.Evidence {
		m.Text += fmt.Sprintf("  %s: %.4g %s\n", ev.Name, ev.Value, ev.Unit)
	}
	m.Text += "\nWhat to do: " + e.Advice + "\n"
	return m
}
