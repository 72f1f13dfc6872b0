package main

import (
	"context"
	"errors"
	"flag"
	"fmt"
	"io"
	"net/http"
	"os"
	"strings"
	"time"
)

const healthWithin = 5 * time.Second

// cmdHealth asks a running daemon how it is: for container engines, which have no other program to ask with.
func cmdHealth(args []string) int {
	fs := flag.NewFlagSet("health", flag.ContinueOnError)
	address := fs.String("address", "127.0.0.1:9470", "`address` of the daemon's pages")
	ready := fs.Bool("ready", false, "ask whether readings are taken and stored, not only whether it lives")
	fs.Usage = func() {
		fmt.Fprint(os.Stderr, "example: fluxwarden health --address 127.0.0.1:9470\n\n")
		fs.PrintDefaults()
	}
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if fs.NArg() > 0 {
		return complain(exitUsage, errors.New("health: takes flags only"))
	}
	path := "/-/healthy"
	if *ready {
		path = "/-/ready"
	}
	ctx, cancel := context.WithTimeout(context.Background(), healthWithin)
	defer cancel()
	req, err := http.NewRequestWithContext(ctx, http.MethodGet, "http://"+*address+path, nil)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("health: %w", err))
	}
	resp, err := http.DefaultClient.Do(req)
	if err != nil {
		return complain(exitProblem, fmt.Errorf("health: %w; is the daemon running, and listening there?", err))
	}
	defer resp.Body.Close()
	text, _ := io.ReadAll(io.LimitReader(resp.Body, 4096))
	fmt.Println(strings.TrimSpace(string(text)))
	if resp.StatusCode != http.StatusOK {
		return exitProblem
	}
	return exitOK
}
