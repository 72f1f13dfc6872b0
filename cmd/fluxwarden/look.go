package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"net"
	"net/http"
	"os"
	"os/signal"
	"syscall"
	"time"

	"fluxwarden/cmd/fluxwarden/console"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdLook serves the console over an archive that no daemon need be running on.
func cmdLook(args []string) int {
	fs := flag.NewFlagSet("look", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	site := fs.String("site", "", "site file, for names, limits and calibrations; the archive's newest rules otherwise")
	listen := fs.String("listen", "127.0.0.1:8380", "address of the pages")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || fs.NArg() > 0 {
		return complain(exitUsage, errors.New("look: want --archive DIR [--site FILE] [--listen 127.0.0.1:8380]"))
	}
	a, err := store.Open(vfs.OS{}, *archive)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("look: %w", err))
	}
	s, err := siteOf(a, *site)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("look: %w", err))
	}
	c := console.New(console.Config{Archive: console.Of(a), Site: func() *rules.Site { return s }, Now: time.Now, Program: "fluxwarden " + version})
	if err := c.Warm(context.Background()); err != nil {
		return complain(exitProblem, fmt.Errorf("look: %w", err))
	}
	l, err := net.Listen("tcp", *listen)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("look: listen on %s: %w; give another address with --listen", *listen, err))
	}
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	server := &http.Server{Handler: c.Handler(), ReadHeaderTimeout: 5 * time.Second, WriteTimeout: 30 * time.Second}
	go func() { <-ctx.Done(); server.Close() }()
	fmt.Fprintf(os.Stderr, "look at http://%s/ ; Ctrl-C ends it\n", l.Addr())
	if err := server.Serve(l); !errors.Is(err, http.ErrServerClosed) {
		return complain(exitProblem, fmt.Errorf("look: %w", err))
	}
	return exitOK
}
