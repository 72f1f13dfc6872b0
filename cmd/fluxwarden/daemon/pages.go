package daemon

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"net/http"
	"time"

	"github.com/prometheus/client_golang/prometheus/promhttp"

	"fluxwarden/cmd/fluxwarden/console"
	"fluxwarden/ingest/broker"
	"fluxwarden/rules"
)

// handler serves metrics, health and the console.
func (d *Daemon) handler() http.Handler {
	mux := http.NewServeMux()
	mux.Handle("GET /metrics", promhttp.HandlerFor(d.metrics.Registry, promhttp.HandlerOpts{}))
	mux.HandleFunc("GET /-/healthy", func(w http.ResponseWriter, _ *http.Request) { fmt.Fprintln(w, "healthy") })
	mux.HandleFunc("GET /-/ready", func(w http.ResponseWriter, _ *http.Request) {
		if why := d.NotReady(); why != "" {
			http.Error(w, "not ready: "+why, http.StatusServiceUnavailable)
			return
		}
		fmt.Fprintln(w, "ready")
	})
	mux.Handle("/", d.hub.console.Handler())
	mux.HandleFunc("GET /status.json", d.morningSheet)
	return mux
}

// openConsole makes the pages; what the archive holds of the last day is read beside, so that they are there at once.
func (d *Daemon) openConsole(run context.Context) {
	d.hub.console = console.New(console.Config{Archive: d.archive.Read, Site: d.rules.newest, Now: d.config.Clock.Now, Trouble: d.NotReady,
		People: d.config.Settings.Console.People, Note: d.keepNote, Failed: func() { d.metrics.Failed("http") }, Program: d.config.Program})
	if d.config.Settings.Listen == "none" || d.config.Settings.Listen == "" {
		return
	}
	d.done.Go(func() {
		if err := d.hub.console.Warm(run); err != nil {
			d.metrics.Failed("http")
			d.log.Warn("the network page begins empty", "cause", err)
		}
	})
}

// keepNote gives a note from the console to the stream that the worker reads, as the command note does.
func (d *Daemon) keepNote(ctx context.Context, n *rules.Note) error {
	if !d.connected.Load() {
		return errors.New("the broker is not reached")
	}
	text, err := json.Marshal(n)
	if err != nil {
		return err
	}
	return d.broker.PublishChange(ctx, broker.PartitionOf(n.Station), text)
}

const (
	readHeaderTimeout = 5 * time.Second
	writeTimeout      = 30 * time.Second
)

func newServer(h http.Handler) *http.Server {
	return &http.Server{Handler: h, ReadHeaderTimeout: readHeaderTimeout, ReadTimeout: writeTimeout, WriteTimeout: writeTimeout}
}

func shutdownServer(s *http.Server) {
	ctx, cancel := context.WithTimeout(context.Background(), time.Second)
	defer cancel()
	if s.Shutdown(ctx) != nil {
		s.Close()
	}
}
