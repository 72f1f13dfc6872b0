package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"log/slog"
	"os"
	"os/signal"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/rules"
)

// cmdRun runs the daemon until it is told to stop.
func cmdRun(args []string) int {
	fs := flag.NewFlagSet("run", flag.ContinueOnError)
	site := fs.String("site", "", "the site `file`: stations, instruments, rules")
	settings := fs.String("settings", "", "a settings `file`; flags go before it")
	archive := fs.String("archive", "", "`directory` of the archive")
	listen := fs.String("listen", "", "`address` of the console and /metrics; none for none")
	brokerURL := fs.String("broker", "", "`url` of an external broker, nats://host:port; without it the broker runs in this process")
	credentials := fs.String("credentials", "", "credentials `file` for an external broker")
	stations := fs.String("stations-listen", "", "`address` at which the broker in this process takes readings; none for none")
	journal := fs.String("journal", "", "`directory` of the journal of the broker in this process")
	printSettings := fs.Bool("print-settings", false, "print all settings as they would hold, and stop")
	fs.Usage = func() {
		fmt.Fprint(os.Stderr, "example: fluxwarden run --site site.yaml --archive ./archive\n\n")
		fs.PrintDefaults()
	}
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	load := func() (daemon.Settings, error) {
		s := daemon.DefaultSettings()
		if *settings != "" {
			var err error
			if s, err = daemon.LoadSettings(*settings); err != nil {
				return s, err
			}
		}
		for _, f := range []struct {
			flag *string
			to   *string
		}{{archive, &s.Archive}, {listen, &s.Listen}, {brokerURL, &s.Broker.URL}, {credentials, &s.Broker.Credentials}, {stations, &s.Broker.Listen}, {journal, &s.Broker.Store}} {
			if *f.flag != "" {
				*f.to = *f.flag
			}
		}
		return s, nil
	}
	s, err := load()
	if err != nil {
		return complain(exitUsage, err)
	}
	if *printSettings {
		fmt.Print(s.Example())
		return exitOK
	}
	if *site == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("run: name a site file: fluxwarden run --site site.yaml"))
	}
	return runDaemon(s, load, *site)
}

// loadSite reads a site file, parsed and as written.
func loadSite(path string) (*rules.Site, []byte, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, nil, fmt.Errorf("site file: %w", err)
	}
	site, err := rules.Parse(path, text)
	return site, text, err
}

func runDaemon(s daemon.Settings, load func() (daemon.Settings, error), sitePath string) int {
	log := slog.New(slog.NewTextHandler(os.Stderr, nil))
	site, text, err := loadSite(sitePath)
	if err != nil {
		return complain(exitUsage, err)
	}
	for _, w := range site.Warnings {
		log.Warn("site file", "warning", w)
	}
	signals := make(chan os.Signal, 4)
	signal.Notify(signals, os.Interrupt, syscall.SIGTERM, syscall.SIGHUP)
	started := daemon.ExtendStart()
	d, err := daemon.Start(context.Background(), daemon.Config{Settings: s, Site: site, SiteText: text, Log: log, Program: "fluxwarden " + version})
	started()
	if err != nil {
		var unusable *daemon.Unusable
		if errors.As(err, &unusable) {
			return complain(exitUsage, err)
		}
		return complain(exitProblem, err)
	}
	go func() { // a stop must not wait for it
		d.AwaitReplay(context.Background(), daemon.Notify)
		daemon.Notify("READY=1")
	}()
	log.Info("running", "network", site.Network.ID, "stations", len(site.Stations), "archive", s.Archive, "pages", d.Address(), "broker", d.BrokerURL())
	for sig := range signals {
		if sig != syscall.SIGHUP {
			break
		}
		if err := d.ReloadSettings(load()); err != nil {
			log.Warn("settings", "cause", err)
		}
		site, text, err := loadSite(sitePath)
		if err := d.Reload(site, text, err); err != nil {
			log.Error("the site file is refused; the rules in force stay", "cause", err)
			continue
		}
		log.Info("the site file holds from the next UTC day on", "rules", site.Digest)
	}
	return stopDaemon(d, signals, log)
}

// stopDaemon stops cleanly; another signal, or too long a time, ends it at once. Nothing is lost by that: what is not committed is in the
// journal.
func stopDaemon(d *daemon.Daemon, signals <-chan os.Signal, log *slog.Logger) int {
	stopped := make(chan error, 1)
	go func() { stopped <- d.Stop() }()
	limit := time.NewTimer(stopWithin)
	defer limit.Stop()
	for {
		select {
		case err := <-stopped:
			if err != nil {
				return complain(exitProblem, fmt.Errorf("stop: %w", err))
			}
			log.Info("stopped; what is not yet in the archive is in the journal")
			return exitOK
		case sig := <-signals:
			if sig != syscall.SIGHUP {
				log.Warn("stopped at once; what is not yet in the archive is in the journal")
				return exitProblem
			}
		case <-limit.C:
			return complain(exitProblem, fmt.Errorf("stop: not done within %v; what is not yet in the archive is in the journal", stopWithin))
		}
	}
}

const stopWithin = 4500 * time.Millisecond
