// Command fluxwarden watches over the instruments of radiation stations: it judges every reading, says which instrument is at fault, and
// keeps an archive of clean minutes.
package main

import (
	"errors"
	"flag"
	"fmt"
	"os"
	"strings"
	_ "time/tzdata" // zones of quiet hours, where the machine has none

	_ "golang.org/x/crypto/x509roots/fallback" // authorities, where the machine has none
)

// Exit codes.
const (
	exitOK      = 0
	exitProblem = 1 // it ran and found a problem, or could not finish
	exitUsage   = 2 // wrong flags, a wrong site file or settings
)

// version is set when a release is linked.
var version = "dev"

// A command is one word of the command line.
type command struct {
	name  string
	about string
	run   func(args []string) int
}

func commands() []command {
	return []command{
		{"demo", "an invented network, from readings to archive, in one process", cmdDemo},
		{"run", "the daemon: takes readings, judges them, keeps the archive", cmdRun},
		{"judge", "judge files of readings into an archive", cmdJudge},
		{"rejudge", "judge an archive's readings again with today's site file", cmdRejudge},
		{"note", "write down a visit, a cleaning, an override; list what was written", cmdNote},
		{"verify", "prove an archive intact, or name what is not", cmdVerify},
		{"history", "the revisions of a station-day: what changed, why, by how much", cmdHistory},
		{"export", "write an archive's minutes, readings or clean products as CSV, NetCDF or Parquet", cmdExport},
		{"faults", "list the episodes: which instrument, what, since when, what to do", cmdFaults},
		{"status", "the morning sheet: what is wrong, the worst first, what to take along, whether repairs worked", cmdStatus},
		{"sky", "what the judge expects: sun, clear sky, the bounds of every limit", cmdSky},
		{"budget", "what an instrument's uncertainty is made of, in one minute", cmdBudget},
		{"lint", "check site files", cmdLint},
		{"refused", "list, show and requeue what was refused", cmdRefused},
		{"credentials", "who may send: make, list and revoke credentials", cmdCredentials},
		{"feed", "bring a logger's files to a daemon elsewhere", cmdFeed},
		{"simulate", "write a synthetic station's readings with labelled faults", cmdSimulate},
		{"look", "pages over an archive in a browser: network, days, faults, residuals", cmdLook},
		{"people", "who may sign in to the console", cmdPeople},
		{"report", "a station's month as one page to print or send", cmdReport},
		{"health", "ask a running daemon how it is", cmdHealth},
		{"version", "print the version", func([]string) int { fmt.Println("fluxwarden", version); return exitOK }},
	}
}

func main() {
	if len(os.Args) < 2 {
		usage()
		os.Exit(exitUsage)
	}
	if os.Args[1] == "help" || os.Args[1] == "-h" || os.Args[1] == "--help" {
		usage()
		os.Exit(exitOK)
	}
	for _, c := range commands() {
		if c.name == os.Args[1] {
			os.Exit(c.run(os.Args[2:]))
		}
	}
	fmt.Fprintf(os.Stderr, "fluxwarden: no command %q%s\n", os.Args[1], suggestion(os.Args[1]))
	os.Exit(exitUsage)
}

func usage() {
	var b strings.Builder
	b.WriteString("example: fluxwarden judge --site site.yaml --archive ./archive readings.csv\n\n")
	for _, c := range commands() {
		fmt.Fprintf(&b, "  %-11s %s\n", c.name, c.about)
	}
	b.WriteString("\nfluxwarden COMMAND --help lists a command's flags.\n")
	fmt.Fprint(os.Stderr, b.String())
}

// suggestion names the command that shares the longest beginning with what was typed.
func suggestion(typed string) string {
	best, length := "", 1
	for _, c := range commands() {
		n := 0
		for n < len(typed) && n < len(c.name) && typed[n] == c.name[n] {
			n++
		}
		if n > length {
			best, length = c.name, n
		}
	}
	if best == "" {
		return "; fluxwarden help lists them"
	}
	return fmt.Sprintf("; did you mean %s?", best)
}

// complain prints an error last on the screen and gives the exit code.
func complain(code int, err error) int {
	fmt.Fprintf(os.Stderr, "fluxwarden: %v\n", err)
	return code
}

// parseCode is the exit code after flags that could not be parsed: asking for help is no misuse.
func parseCode(err error) int {
	if errors.Is(err, flag.ErrHelp) {
		return exitOK
	}
	return exitUsage
}
