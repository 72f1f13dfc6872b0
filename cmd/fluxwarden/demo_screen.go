package main

import (
	"fmt"
	"io"
	"io/fs"
	"os"
	"path/filepath"
	"strings"
	"time"

	"golang.org/x/term"

	"fluxwarden/ingest/gate"
	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// processBegun stands for the start of the process.
var processBegun = time.Now()

// A demoScreen shows the demo: a block that renews itself on a terminal, plain lines elsewhere.
type demoScreen struct {
	d        *demo
	out      io.Writer
	live     bool
	colour   bool
	width    int
	lines    int // of the block on the screen
	drawn    time.Time
	reported time.Time // station time of the last plain report
	first    bool
	recent   []string // what began and ended, newest last
}

const (
	redrawEvery  = 250 * time.Millisecond
	reportEvery  = time.Hour // of station time
	recentMax    = 5
	widthDefault = 100
	widthMin     = 60
)

func newDemoScreen(d *demo) *demoScreen {
	s := &demoScreen{d: d, out: os.Stdout, width: widthDefault, reported: demoBegins}
	if fd := int(os.Stdout.Fd()); term.IsTerminal(fd) && os.Getenv("TERM") != "dumb" {
		s.live, s.colour = true, os.Getenv("NO_COLOR") == ""
		if w, _, err := term.GetSize(fd); err == nil && w >= widthMin {
			s.width = w
		}
	}
	return s
}

// begin says where to look.
func (s *demoScreen) begin() {
	d := s.d
	fmt.Fprintf(s.out, "%s: %d invented stations, seed %d, %g seconds of station time in a second, from %s on.\n", d.site.Network.Name, len(d.site.Stations),
		d.options.seed, d.options.speed, demoBegins.Format("2006-01-02 15:04Z"))
	if address := d.daemon.Address(); address != "" {
		fmt.Fprintf(s.out, "  console       http://%s/\n  metrics       http://%s/metrics\n", address, address)
	}
	fmt.Fprintf(s.out, "  front door    %s, subject %s<station>\n  archive       %s\n  site file     %s\nCtrl-C stops it.\n\n", d.daemon.BrokerURL(), gate.SubjectPrefix, d.places.archive, d.places.site)
}

// update shows what is new, not oftener than an eye wants.
func (s *demoScreen) update() {
	if time.Since(s.drawn) < redrawEvery {
		return
	}
	s.drawn = time.Now()
	rows, events := s.d.board.take()
	if s.live {
		for i := range events {
			s.recent = append(s.recent, "  "+demoWords(&events[i]))
		}
		s.recent = s.recent[max(0, len(s.recent)-recentMax):]
		s.draw(s.block(rows))
		return
	}
	s.report(rows, events)
}

// report writes plain lines: the first judged minute, what begins and ends, and a table an hour.
func (s *demoScreen) report(rows []demoRow, events []demoEvent) {
	if after, ok := s.d.board.firstAfter(processBegun); ok && !s.first {
		s.first = true
		fmt.Fprintf(s.out, "first minute judged %.1f s after the start\n", after.Seconds())
	}
	for i := range events {
		fmt.Fprintln(s.out, "  "+demoWords(&events[i]))
		if e := &events[i].episode; e.To == fault.Open && e.Advice != "" {
			fmt.Fprintln(s.out, "    "+e.Advice)
		}
	}
	if now := s.d.clock.Now(); now.Sub(s.reported) >= reportEvery {
		s.reported = now.Truncate(reportEvery)
		for _, line := range s.table(rows) {
			fmt.Fprintln(s.out, line)
		}
	}
}

// table is one line a station.
func (s *demoScreen) table(rows []demoRow) []string {
	lines := []string{fmt.Sprintf("%-17s %-11s %8s %9s %11s %9s %7s", s.d.clock.Now().Format("2006-01-02 15:04Z"), "last minute", "minutes", "accepted", "questioned", "rejected", "absent")}
	for i := range rows {
		r := &rows[i]
		last := "-"
		if r.last > 0 {
			last = time.Unix(60*(r.last-1), 0).UTC().Format("15:04Z")
		}
		line := fmt.Sprintf("  %-15s %-11s %8d", r.id, last, r.judged)
		for _, v := range []struct {
			verdict rules.Verdict
			width   int
		}{{rules.Accepted, 9}, {rules.Questioned, 11}, {rules.Rejected, 9}, {rules.Absent, 7}} {
			line += fmt.Sprintf(" %*.1f%%", v.width-1, r.share(v.verdict))
		}
		lines = append(lines, line)
	}
	return lines
}

// block is what stands on a terminal.
func (s *demoScreen) block(rows []demoRow) []string {
	lines := s.table(rows)
	lines[0] = s.paint("1", s.cut(lines[0]))
	lines = append(lines, "", s.paint("1", "What is wrong"))
	wrong := 0
	for i := range rows {
		for k := range rows[i].open {
			wrong++
			e := demoEvent{rows[i].id, rows[i].open[k]}
			code := "33"
			if e.episode.Severity == rules.Act {
				code = "31"
			}
			lines = append(lines, s.paint(code, s.cut("  "+demoWords(&e))), s.cut("    "+e.episode.Advice))
		}
	}
	if wrong == 0 {
		lines = append(lines, "  nothing known")
	}
	if len(s.recent) > 0 {
		lines = append(lines, "", s.paint("1", "Last to begin or end"))
		for _, line := range s.recent {
			lines = append(lines, s.cut(line))
		}
	}
	return lines
}

// draw puts a block over the one before.
func (s *demoScreen) draw(lines []string) {
	var b strings.Builder
	if s.lines > 0 {
		fmt.Fprintf(&b, "\x1b[%dA", s.lines)
	}
	for _, line := range lines {
		fmt.Fprintf(&b, "\x1b[2K%s\n", line)
	}
	b.WriteString("\x1b[J")
	s.lines = len(lines)
	fmt.Fprint(s.out, b.String())
}

func (s *demoScreen) cut(line string) string {
	if runes := []rune(line); len(runes) > s.width-1 {
		return string(runes[:s.width-4]) + "..."
	}
	return line
}

func (s *demoScreen) paint(code, line string) string {
	if !s.colour {
		return line
	}
	return "\x1b[" + code + "m" + line + "\x1b[0m"
}

// end says what was written and how to read it.
func (s *demoScreen) end() {
	rows, events := s.d.board.take()
	if !s.live {
		s.report(rows, events)
	} else {
		s.draw(s.block(rows))
	}
	files, bytes := weigh(s.d.places.archive)
	program := programName()
	station := s.d.site.Stations[0].ID
	fmt.Fprintf(s.out, "\nStopped at %s station time: %d station-minutes judged and written, %d files, %.1f MB in\n  %s\nTo read it:\n", s.d.clock.Now().Format("2006-01-02 15:04Z"),
		s.d.board.total(), files, float64(bytes)/1e6, s.d.places.archive)
	fmt.Fprintf(s.out, "  %s export --archive %s --station %s --product minutes --format csv\n", program, s.d.places.archive, station)
	fmt.Fprintf(s.out, "  %s faults --archive %s\n", program, s.d.places.archive)
	fmt.Fprintf(s.out, "  %s sky --site %s --station %s --from %s --to %s --format table\n", program, s.d.places.site, station,
		demoBegins.Format(time.RFC3339), demoBegins.Add(time.Hour).Format(time.RFC3339))
	fmt.Fprintln(s.out, "or open its Parquet files with any engine that reads them.")
}

// weigh counts the archive's files.
func weigh(dir string) (files int, bytes int64) {
	_ = filepath.WalkDir(dir, func(_ string, e fs.DirEntry, err error) error {
		if err == nil && e.Type().IsRegular() {
			if info, err := e.Info(); err == nil {
				files, bytes = files+1, bytes+info.Size()
			}
		}
		return nil
	})
	return files, bytes
}

// programName is how the program was called: go run leaves it among its temporary files, where nobody can call it again.
func programName() string {
	if exe, err := os.Executable(); err == nil && strings.Contains(exe, "go-build") {
		return "go run ./cmd/fluxwarden"
	}
	return os.Args[0]
}
