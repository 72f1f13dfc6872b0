// Package daemon puts the parts together: broker, gate, worker, archive, metrics and pages, and takes them apart again.
package daemon

import (
	"context"
	"errors"
	"fmt"
	"io/fs"
	"log/slog"
	"net"
	"net/http"
	"os"
	"strings"
	"sync"
	"sync/atomic"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/metrics"
	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// A Config is what a daemon is started with. Site and SiteText are one site file, parsed and as written.
type Config struct {
	Settings Settings
	Site     *rules.Site
	SiteText []byte
	Clock    worker.Clock // nil is the system's
	Log      *slog.Logger // nil is silent
	Program  string       // name and version
	// OnMinutes and OnEpisodes are told of judged minutes as they come about; they must be quick and keep nothing of the Judged.
	OnMinutes  func(j *engine.Judged, from, to int)
	OnEpisodes func(station string, episodes []fault.Episode)
	// CommitAtStop writes what was judged since the last commit before the daemon stops. Without it that is judged again from the
	// journal at the next start.
	CommitAtStop bool
}

// A Daemon is a running daemon.
type Daemon struct {
	config   Config
	log      *slog.Logger
	metrics  *metrics.Metrics
	archive  *worker.Store
	rules    *ruleBook
	hub      *hub
	embedded *broker.Embedded
	broker   *broker.Broker
	access   *broker.Access
	ways     ways
	gate     atomic.Pointer[gate.Gate]
	server   *http.Server
	address  string

	connected  atomic.Bool
	diskLow    atomic.Bool
	overBudget atomic.Bool
	diskFloor  atomic.Int64
	noClock    atomic.Bool
	working    atomic.Bool
	caughtUp   atomic.Bool
	progress   atomic.Int64 // of the worker, wall time in ns
	cancel     context.CancelFunc
	done       sync.WaitGroup
	stopOnce   sync.Once
	stopErr    error
}

// An Unusable is an error of the kind that no restart mends: something in settings or surroundings must be changed first.
type Unusable struct{ Err error }

func (u *Unusable) Error() string { return u.Err.Error() }
func (u *Unusable) Unwrap() error { return u.Err }

type systemClock struct{}

func (systemClock) Now() time.Time { return time.Now() }

// Start starts a daemon. With an external broker it returns before the broker is reached, and goes on trying.
func Start(ctx context.Context, c Config) (*Daemon, error) {
	if err := c.Settings.Check(); err != nil {
		return nil, &Unusable{err}
	}
	if c.Clock == nil {
		c.Clock = systemClock{}
	}
	if c.Log == nil {
		c.Log = slog.New(slog.DiscardHandler)
	}
	d := &Daemon{config: c, log: c.Log, metrics: metrics.New(c.Program, c.Clock.Now)}
	d.hub = &hub{metrics: d.metrics, onMinutes: c.OnMinutes, onEpisodes: c.OnEpisodes, heard: map[string]bool{}}
	d.diskFloor.Store(int64(c.Settings.DiskFloor))
	d.lookAtClock()
	run, cancel := context.WithCancel(context.WithoutCancel(ctx))
	d.cancel = cancel
	openConsole := func(context.Context) error { d.openConsole(run); return nil }
	if err := d.checkBudget(); err != nil {
		cancel()
		return nil, err
	}
	for _, step := range []func(context.Context) error{d.openArchive, d.openNotifier, openConsole, d.openPages, d.openAccess, d.openBroker, d.openWays} {
		if err := step(ctx); err != nil {
			_ = d.Stop()
			return nil, err
		}
	}
	d.done.Go(func() { d.watchDisk(run) })
	d.done.Go(func() { d.watchArchive(run) })
	d.done.Go(func() { d.watchAccess(run) })
	if d.embedded != nil { // nothing can keep it waiting: what is wrong is said at once
		if err := d.bringUp(run); err != nil {
			_ = d.Stop()
			return nil, err
		}
		return d, nil
	}
	d.done.Go(func() {
		if err := d.bringUp(run); err != nil && run.Err() == nil {
			d.metrics.Failed("broker")
			d.log.Error("the broker cannot be used", "cause", err)
		}
	})
	return d, nil
}

func (d *Daemon) openArchive(context.Context) error {
	dir := d.config.Settings.Archive
	if err := underManager(dir); err != nil {
		return &Unusable{err}
	}
	if err := os.MkdirAll(dir, 0o755); err != nil {
		return &Unusable{fmt.Errorf("archive %s: %w; make the directory writable for uid %d or name another with --archive", dir, err, os.Getuid())}
	}
	host, _ := os.Hostname()
	a, err := worker.OpenStore(vfs.OS{}, dir, store.Options{Owner: fmt.Sprintf("process %d on %s%s", os.Getpid(), host, brokerWords(&d.config.Settings.Broker))})
	var held *vfs.HeldError
	switch {
	case errors.As(err, &held):
		return fmt.Errorf("%w; stop that program, or name another archive with --archive", err)
	case errors.Is(err, fs.ErrPermission) || errors.Is(err, syscall.EROFS):
		return &Unusable{fmt.Errorf("archive %s: %w; make the directory writable for uid %d or name another with --archive", dir, err, os.Getuid())}
	case err != nil:
		return err
	}
	d.archive = a
	today := minute.Stamp(d.config.Clock.Now().UnixMicro()).Day()
	d.rules, err = openRuleBook(dir, storeKeeper{a.Read}, d.config.Site, d.config.SiteText, today)
	if err != nil {
		return err
	}
	d.metrics.Reloaded(true, d.config.Clock.Now())
	d.metrics.Stations(d.stationIDs())
	d.metrics.Calibrations(d.rules.newest())
	return nil
}

// brokerWords tell those who find the archive in use where they reach its daemon: the command note reads it.
func brokerWords(b *BrokerSettings) string {
	switch {
	case b.URL != "":
		return ", broker " + b.URL
	case b.Listen != "none" && b.Listen != "" && !strings.HasSuffix(b.Listen, ":0"):
		return ", broker nats://" + b.Listen
	}
	return ""
}

func (d *Daemon) stationIDs() []string {
	site := d.rules.newest()
	ids := make([]string, len(site.Stations))
	for i := range site.Stations {
		ids[i] = site.Stations[i].ID
	}
	return ids
}

func (d *Daemon) openPages(context.Context) error {
	address := d.config.Settings.Listen
	if address == "none" || address == "" {
		return nil
	}
	l, err := net.Listen("tcp", address)
	if errors.Is(err, syscall.EADDRINUSE) {
		return fmt.Errorf("listen on %s: the port is in use; stop the program that has it, or give another with --listen", address)
	}
	if err != nil {
		return &Unusable{fmt.Errorf("listen on %s: %w; give host:port with --listen", address, err)}
	}
	d.address = l.Addr().String()
	d.server = newServer(d.handler())
	d.done.Go(func() {
		if err := d.server.Serve(l); err != nil && !errors.Is(err, http.ErrServerClosed) {
			d.metrics.Failed("http")
			d.log.Error("pages are no longer served", "cause", err)
		}
	})
	return nil
}

func (d *Daemon) streams() broker.StreamSettings {
	s, b := broker.DefaultStreams(), d.config.Settings.Broker
	s.JournalBytes, s.RefusedBytes, s.FindingsBytes = int64(b.Journal), int64(b.Refused), int64(b.Findings)
	return s
}

func (d *Daemon) openBroker(ctx context.Context) error {
	b := d.config.Settings.Broker
	connect := broker.ConnectSettings{URL: b.URL, Credentials: b.Credentials, Name: "fluxwarden", OnState: d.brokerState}
	if b.URL == "" {
		s := broker.EmbeddedSettings{StoreDir: b.Store, StoreBytes: d.streams().Bytes(), Log: d.log, Access: d.access, TLS: d.ways.tls}
		if b.Listen != "none" && b.Listen != "" {
			host, port, err := splitAddress(b.Listen)
			if err != nil {
				return &Unusable{err}
			}
			s.Listen, s.Host, s.Port = true, host, port
			if port != 0 {
				if err := free(b.Listen); err != nil {
					return err
				}
			}
		}
		if err := d.leafSettings(&s.Leaf); err != nil {
			return &Unusable{err}
		}
		e, err := broker.StartEmbedded(ctx, s)
		if err != nil {
			return err
		}
		d.embedded, connect.Embedded = e, e
	}
	var err error
	if d.broker, err = broker.Connect(connect); err != nil {
		return &Unusable{err}
	}
	if !d.broker.Connected() && d.embedded == nil {
		d.metrics.Failed("broker")
		d.log.Warn("the broker does not answer; it is tried again for ever, and nothing is taken meanwhile", "url", b.URL)
	}
	return nil
}

func splitAddress(address string) (host string, port int, err error) {
	host, text, err := net.SplitHostPort(address)
	if err == nil {
		port, err = net.LookupPort("tcp", text)
	}
	if err != nil {
		return "", 0, fmt.Errorf("settings: broker: listen: %q: %w; write host:port, such as 127.0.0.1:4222", address, err)
	}
	return host, port, nil
}

// free says whether nobody listens on the address: the embedded server says so only after half a minute.
func free(address string) error {
	l, err := net.Listen("tcp", address)
	if errors.Is(err, syscall.EADDRINUSE) {
		return fmt.Errorf("broker: listen on %s: the port is in use; stop the program that has it, give another in settings (broker: listen), or use its broker with --broker nats://%s", address, address)
	}
	if err != nil {
		return &Unusable{fmt.Errorf("broker: listen on %s: %w", address, err)}
	}
	return l.Close()
}

func (d *Daemon) brokerState(s broker.State) {
	was := d.connected.Swap(s.Connected)
	switch {
	case d.embedded != nil && s.Connected: // nothing to tell: it is in this process
	case s.Connected && !was:
		d.log.Info("connected to the broker", "url", s.URL)
	case !s.Connected && !was && !s.Closed && s.Err != nil:
		d.metrics.Failed("broker") // one more try in vain
	case !s.Connected && was && !s.Closed:
		d.metrics.Failed("broker")
		d.log.Warn("the broker is away; it is tried again for ever", "cause", s.Err)
	}
}

// bringUp makes the streams, opens the gate and sets the worker to work.
func (d *Daemon) bringUp(ctx context.Context) error {
	if err := d.broker.EnsureStreams(ctx, d.streams()); err != nil {
		return err
	}
	known := d.known()
	g, err := gate.New(d.broker, gate.Settings{Known: known, Now: d.config.Clock.Now, DiskLow: func() bool { return d.diskLow.Load() || d.overBudget.Load() }, NoClock: d.noClock.Load, Meter: d.metrics.Gate(), Log: d.log,
		Clock: d.ways.metrics.Clock})
	if err != nil {
		return err
	}
	if err := g.Start(); err != nil {
		return err
	}
	d.gate.Store(g)
	w := worker.New(worker.Config{
		Journal: &journal{b: d.broker, onFull: d.metrics.Journal, hold: d.holdForHub()}, Lease: d.lease(ctx), Changes: &changes{b: d.broker}, Archive: d.archive, Rules: d.rules,
		Findings: findings{d.broker, d.config.Clock.Now, d.ways.metrics.ClockAhead}, Aside: aside{d.broker, d.config.Clock.Now}, Live: d.hub, Meter: d.metrics.Worker(),
		Clock: d.config.Clock, Log: d.log, Program: d.config.Program, Grace: time.Duration(d.config.Settings.Grace),
		CommitEvery: time.Duration(d.config.Settings.CommitEvery), KeepRaw: time.Duration(d.config.Settings.KeepRaw)})
	d.working.Store(true)
	d.done.Go(func() { d.work(ctx, w) })
	d.follow(d.rules.newest())
	d.startEdgeOrHub(ctx)
	return nil
}

func (d *Daemon) lease(ctx context.Context) worker.Lease {
	epoch := uint64(time.Now().UnixMilli()) // a later life has a greater one
	if d.embedded != nil {
		return soleLease{epoch}
	}
	l := &brokerLease{epoch: epoch}
	host, _ := os.Hostname()
	d.done.Go(func() {
		l.keep(ctx, d.broker, host+":"+d.config.Settings.Archive, d.streams().LeaseTTL, d.log, d.metrics.Failed)
	})
	return l
}

// stepWait is how long the worker waits for a message before it looks after other things.
const stepWait = 200 * time.Millisecond

func (d *Daemon) work(ctx context.Context, w *worker.Worker) {
	defer w.Close()
	for ctx.Err() == nil {
		w.Step(ctx, stepWait)
		d.progress.Store(time.Now().UnixNano())
		d.caughtUp.Store(w.Ready())
	}
	d.caughtUp.Store(false)
	if d.config.CommitAtStop {
		w.CommitAll(context.WithoutCancel(ctx))
	}
}

// stuckAfter is how long the worker may take over one step before it counts as stuck.
const stuckAfter = time.Minute

// NotReady says why readings are not consumed and stored; empty when they are.
func (d *Daemon) NotReady() string {
	switch {
	case !d.connected.Load():
		return "the broker is away"
	case !d.working.Load():
		return "the streams are not there yet"
	case d.noClock.Load():
		return "the clock is not set: it stands before 2020"
	case d.diskLow.Load():
		return "the disk is nearly full"
	case d.overBudget.Load():
		return "the disk budget is used up"
	case time.Since(time.Unix(0, d.progress.Load())) > stuckAfter:
		return "the worker is stuck"
	case !d.caughtUp.Load():
		return "the journal is being read"
	}
	return ""
}

const diskEvery = 5 * time.Second

// watchDisk looks after free space and what follows from it, and pings the service manager while work goes on.
func (d *Daemon) watchDisk(ctx context.Context) {
	every := diskEvery
	if ping := watchdogEvery(); ping > 0 {
		every = min(every, ping)
	}
	timer := time.NewTicker(every)
	defer timer.Stop()
	for {
		d.lookAtClock()
		d.lookAtDisk()
		d.lookAtNotes()
		d.tellManager()
		select {
		case <-ctx.Done():
			return
		case <-timer.C:
		}
	}
}

func (d *Daemon) lookAtDisk() {
	floor := uint64(d.diskFloor.Load())
	low := false
	dirs := map[string]string{"archive": d.config.Settings.Archive}
	if d.embedded != nil {
		dirs["journal"] = d.config.Settings.Broker.Store
	}
	for name, dir := range dirs {
		free, err := diskFree(dir)
		if err != nil {
			d.metrics.Failed("disk")
			continue
		}
		d.metrics.Disk(name, free, floor)
		low = low || free < floor
	}
	if was := d.diskLow.Swap(low); low != was {
		if low {
			d.log.Error("the disk is nearly full: no reading is taken until there is room again", "floor", Size(floor).String())
		} else {
			d.log.Info("there is room on the disk again: readings are taken")
		}
	}
}
