package main

import (
	"context"
	_ "embed"
	"errors"
	"flag"
	"fmt"
	"log/slog"
	"net"
	"os"
	"os/signal"
	"path/filepath"
	"sync/atomic"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/cmd/fluxwarden/worker"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// demoSite is the invented network that the demo plays.
//
//go:embed demo_site.yaml
var demoSite []byte

const (
	demoSpeed  = 360 // an hour of station time in ten seconds
	demoListen = "127.0.0.1:9470"
	// demoGrace is how long a minute waits for its readings, by the clock on the wall: the ten seconds of a real station, in station
	// time, would be over before a reading is on disk.
	demoGrace       = 250 * time.Millisecond
	demoCommitEvery = 20 * time.Minute // of station time
	demoSpeedMax    = 3600
)

// demoBegins is a midsummer morning at all three stations, and the beginning of a UTC day, so that no minute of it is missing.
var demoBegins = time.Date(2026, 6, 21, 0, 0, 0, 0, time.UTC)

// demoOptions are the demo's flags.
type demoOptions struct {
	speed   float64
	archive string
	seed    uint64
	listen  string
	length  time.Duration
}

// cmdDemo runs the whole program over an invented network: broker, gate, worker, archive and pages in one process, and stations
// that send to it over the network like real ones, only faster.
func cmdDemo(args []string) int {
	var o demoOptions
	fs := flag.NewFlagSet("demo", flag.ContinueOnError)
	fs.Float64Var(&o.speed, "speed", demoSpeed, "seconds of station time in a second, 1 to 3600; 360 is an hour in ten seconds")
	fs.StringVar(&o.archive, "archive", "", "new or empty folder for the archive; a new one among the temporary files otherwise")
	fs.Uint64Var(&o.seed, "seed", 1, "of the weather and the noise: the same seed gives the same readings")
	fs.StringVar(&o.listen, "listen", "", "address of pages and metrics; "+demoListen+" or a free port otherwise")
	fs.DurationVar(&o.length, "for", 0, "stop after so long, such as 30s; at Ctrl-C otherwise")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if fs.NArg() > 0 || !(o.speed >= 1 && o.speed <= demoSpeedMax) || o.length < 0 {
		return complain(exitUsage, errors.New("demo: want [--speed 1..3600] [--archive DIR] [--seed N] [--listen HOST:PORT] [--for 30s]"))
	}
	d, err := startDemo(o)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("demo: %w", err))
	}
	return d.run()
}

// A demo is a running one.
type demo struct {
	options demoOptions
	places  demoPlaces
	site    *rules.Site
	clock   *demoClock
	daemon  *daemon.Daemon
	board   *demoBoard
	senders *demoSenders
	logFile *os.File
}

// demoPlaces are where the demo writes.
type demoPlaces struct{ root, archive, journal, site, log string }

// A demoClock is the station time. It is moved by who sends the readings, so it never passes one that is not on disk yet.
type demoClock struct{ micros atomic.Int64 }

func (c *demoClock) Now() time.Time { return time.UnixMicro(c.micros.Load()).UTC() }

func (c *demoClock) at() minute.Stamp { return minute.Stamp(c.micros.Load()) }

// makeDemoPlaces makes the folders and leaves the site file there, for the other commands.
func makeDemoPlaces(archive string) (demoPlaces, error) {
	root, err := os.MkdirTemp("", "fluxwarden-demo-")
	if err != nil {
		return demoPlaces{}, err
	}
	p := demoPlaces{root: root, archive: filepath.Join(root, "archive"), journal: filepath.Join(root, "journal"),
		site: filepath.Join(root, "site.yaml"), log: filepath.Join(root, "log.txt")}
	if archive != "" {
		if p.archive, err = filepath.Abs(archive); err != nil {
			return p, err
		}
		if entries, err := os.ReadDir(p.archive); err == nil && len(entries) > 0 {
			os.Remove(root)
			return p, fmt.Errorf("archive %s is not empty; name a new folder with --archive: the demo begins anew each time", p.archive)
		}
	}
	return p, os.WriteFile(p.site, demoSite, 0o644)
}

func startDemo(o demoOptions) (*demo, error) {
	site, err := rules.Parse("demo_site.yaml", demoSite)
	if err != nil {
		return nil, err
	}
	d := &demo{options: o, site: site, clock: &demoClock{}}
	d.clock.micros.Store(demoBegins.UnixMicro())
	if d.places, err = makeDemoPlaces(o.archive); err != nil {
		return nil, err
	}
	if d.logFile, err = os.Create(d.places.log); err != nil {
		return nil, err
	}
	d.board = newDemoBoard(site, d.clock)
	s := daemon.DefaultSettings()
	s.Archive, s.Listen = d.places.archive, demoAddress(o.listen)
	s.Grace, s.CommitEvery = daemon.Duration(demoWait(o.speed)), daemon.Duration(demoCommitEvery)
	s.Broker.URL, s.Broker.Store, s.Broker.Listen = "", d.places.journal, "127.0.0.1:0"
	d.daemon, err = daemon.Start(context.Background(), daemon.Config{Settings: s, Site: site, SiteText: demoSite, Clock: d.clock,
		Log: slog.New(slog.NewTextHandler(d.logFile, nil)), Program: "fluxwarden " + version,
		OnMinutes: d.board.minutes, OnEpisodes: d.board.episodes, CommitAtStop: true})
	if err != nil {
		d.logFile.Close()
		return nil, err
	}
	if d.senders, err = newDemoSenders(site, o.seed, d.daemon.BrokerURL(), d.clock); err != nil {
		return nil, errors.Join(err, d.daemon.Stop())
	}
	return d, nil
}

// demoWait is the grace in station time, at a speed.
func demoWait(speed float64) time.Duration {
	return max(worker.GraceDefault, time.Duration(speed*float64(demoGrace)))
}

// demoAddress is the address asked for, else the usual one, else a free port.
func demoAddress(asked string) string {
	if asked != "" {
		return asked
	}
	l, err := net.Listen("tcp", demoListen)
	if err != nil {
		return "127.0.0.1:0"
	}
	l.Close()
	return demoListen
}

// demoBeat is how often the stations send.
const demoBeat = 50 * time.Millisecond

// run sends until somebody stops it.
func (d *demo) run() int {
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	if d.options.length > 0 {
		var cancel context.CancelFunc
		ctx, cancel = context.WithTimeout(ctx, d.options.length)
		defer cancel()
	}
	shown := newDemoScreen(d)
	shown.begin()
	beat := time.NewTicker(demoBeat)
	defer beat.Stop()
	last := time.Now()
	var err error
	for ctx.Err() == nil && err == nil {
		now := time.Now()
		passed := min(now.Sub(last), time.Second) // where the disk cannot keep up the demo is slower, and owes nothing
		last = now
		err = d.senders.sendUntil(ctx, d.clock.at()+minute.Stamp(passed.Seconds()*d.options.speed*minute.MicrosPerSecond))
		shown.update()
		select {
		case <-ctx.Done():
		case <-beat.C:
		}
	}
	if ctx.Err() != nil {
		err = nil // a request that was cut off by the end
	}
	stop() // a second Ctrl-C ends it at once
	return d.finish(shown, err)
}

// settle is how long the last readings may take from the journal to the worker.
const settle = 500 * time.Millisecond

// finish stops everything, has what was judged written, and says what there is.
func (d *demo) finish(shown *demoScreen, err error) int {
	d.senders.close()
	time.Sleep(settle)
	err = errors.Join(err, d.daemon.Stop(), d.logFile.Close())
	shown.end()
	if err != nil {
		return complain(exitProblem, fmt.Errorf("demo: %w; its log is %s", err, d.places.log))
	}
	if d.board.total() == 0 {
		return complain(exitProblem, fmt.Errorf("demo: no minute was judged; let it run longer, or see its log %s", d.places.log))
	}
	// The demo begins anew each time: what it judged is in the archive, and its journal is of no more use.
	if err := os.RemoveAll(d.places.journal); err != nil {
		return complain(exitProblem, fmt.Errorf("demo: %w; remove it by hand, the archive is whole", err))
	}
	return exitOK
}
