package main

import (
	"cmp"
	"errors"
	"flag"
	"fmt"
	"math"
	"os"
	"runtime"
	"slices"
	"strings"
	"sync"
	"syscall"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"

	"golang.org/x/term"
)

// A rejudging is one run of rejudge.
type rejudging struct {
	archive  *store.Archive
	site     *rules.Site
	siteFile string
	from, to int64 // days, both included
	dryRun   bool
	atOnce   bool // commit a partition as soon as it is judged
	reasons  reasonBook
	tally    tally
	trap     func(block *minute.Block, from int) // a test may panic in it as the core might
	skipped  []string                            // stations that the site file does not have

	mu     sync.Mutex
	diffs  []difference
	drafts []*store.Draft
	wrote  int
}

// cmdRejudge judges an archive's readings again with today's site file and rules.
func cmdRejudge(args []string) int {
	fs := flag.NewFlagSet("rejudge", flag.ContinueOnError)
	archive := fs.String("archive", "", "folder of the archive")
	site := fs.String("site", "", "site file with the rules that shall hold")
	station := fs.String("station", "", "one station; all of them otherwise")
	from := fs.String("from", "", "first day; the first there is otherwise. The ten days before are judged too: what is found may reach back to them")
	to := fs.String("to", "", "last day; the last there is otherwise. Later days follow as far as what is learnt of these changes them")
	yes := fs.Bool("yes", false, "write without asking")
	dryRun := fs.Bool("dry-run", false, "show what would change and write nothing; a daemon may be running meanwhile")
	asJSON := fs.Bool("json", false, "print the differences as JSON lines")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *archive == "" || *site == "" || fs.NArg() > 0 || *yes && *dryRun {
		return complain(exitUsage, errors.New("rejudge: want --archive DIR --site FILE [--station S] [--from DAY] [--to DAY] [--yes | --dry-run] [--json]"))
	}
	r := &rejudging{siteFile: *site, dryRun: *dryRun, atOnce: *yes}
	var err error
	if r.from, r.to, err = dayRange(*from, *to); err != nil {
		return complain(exitUsage, fmt.Errorf("rejudge: %w", err))
	}
	if r.site, err = rules.Load(*site); err != nil {
		return complain(exitUsage, err)
	}
	if r.archive, err = openToRejudge(*archive, *dryRun); err != nil {
		return complain(exitProblem, fmt.Errorf("rejudge: %w", err))
	}
	code, err := r.run(*station, *asJSON)
	if errors.Is(err, syscall.ENOSPC) {
		err = fmt.Errorf("%w; the archive is whole: make room and run it again", err)
	}
	if err = errors.Join(err, r.archive.Close()); err != nil {
		return complain(exitProblem, fmt.Errorf("rejudge: %w", err))
	}
	return code
}

// openToRejudge opens an archive that must be there already.
func openToRejudge(dir string, readOnly bool) (*store.Archive, error) {
	if a, err := store.Open(vfs.OS{}, dir); err != nil || readOnly {
		return a, err
	}
	return store.OpenForWriting(vfs.OS{}, dir, store.Options{Owner: fmt.Sprintf("fluxwarden rejudge, process %d", os.Getpid())})
}

// dayRange reads the first and the last day of a range, either of which may be left out.
func dayRange(from, to string) (first, last int64, err error) {
	first, last = math.MinInt32, math.MaxInt32 // no bound
	for _, x := range []struct {
		text string
		into *int64
	}{{from, &first}, {to, &last}} {
		if x.text == "" {
			continue
		}
		t, err := time.Parse(time.DateOnly, x.text)
		if err != nil {
			return 0, 0, fmt.Errorf("day %q: want a date such as 2026-06-21", x.text)
		}
		*x.into = t.Unix() / 86400
	}
	if first > last {
		return 0, 0, fmt.Errorf("--from %s is after --to %s", from, to)
	}
	return first, last, nil
}

func (r *rejudging) run(station string, asJSON bool) (int, error) {
	groups, err := r.groups(station)
	if err != nil {
		return exitProblem, err
	}
	r.reasons = reasonBook{archive: r.archive, site: r.site}
	r.tally.bar = newProgress(0)
	err = r.judgeAll(groups)
	r.tally.bar.done()
	defer r.dropAll()
	if err != nil {
		return exitProblem, err
	}
	slices.SortFunc(r.diffs, func(a, b difference) int { return strings.Compare(a.Station, b.Station) })
	show := showDifferences
	if asJSON {
		show = writeDifferences
	}
	if err := show(os.Stdout, r.diffs); err != nil {
		return exitProblem, err
	}
	for _, s := range r.skipped {
		fmt.Fprintf(os.Stderr, "station %s: not in %s; its rows stay as they are\n", s, r.siteFile)
	}
	if !slices.ContainsFunc(r.diffs, func(d difference) bool { return !d.empty() }) {
		fmt.Fprintln(os.Stderr, "nothing changes; nothing was written")
		if err := r.finishAll(); err != nil || !r.atOnce { // a draft without rows only says that no day is owed any more
			return exitOK, err
		}
		return exitOK, r.keepSchedule(station != "")
	}
	if r.dryRun {
		fmt.Fprintln(os.Stderr, "nothing was written: --dry-run")
		return exitOK, nil
	}
	if !r.atOnce {
		if !term.IsTerminal(int(os.Stdin.Fd())) {
			return exitProblem, errors.New("nothing was written: there is nobody to ask; say --yes to write these changes")
		}
		if !askYes("Write these changes? The rows before are kept under superseded/.") {
			fmt.Fprintln(os.Stderr, "nothing was written")
			return exitOK, nil
		}
		if err := r.finishAll(); err != nil {
			return exitProblem, err
		}
	}
	fmt.Fprintf(os.Stderr, "written: %d commits\n", r.wrote)
	return exitOK, r.keepSchedule(station != "")
}

// groups gives the stations to judge, those of one partition together: their rows are committed together.
func (r *rejudging) groups(station string) ([][]*rules.Station, error) {
	in, err := stationsOf(r.archive, station)
	if err != nil {
		return nil, err
	}
	by := map[int][]*rules.Station{}
	for _, id := range in {
		st := r.site.Station(id)
		if st == nil {
			if station != "" {
				return nil, fmt.Errorf("%s has no station %q", r.siteFile, id)
			}
			r.skipped = append(r.skipped, id)
			continue
		}
		p := broker.PartitionOf(id)
		by[p] = append(by[p], st)
	}
	if len(by) == 0 {
		return nil, fmt.Errorf("no station of %s has readings in the archive", r.siteFile)
	}
	var list [][]*rules.Station
	for p := range store.Partitions {
		if len(by[p]) > 0 {
			list = append(list, by[p])
		}
	}
	return list, nil
}

// judgeAll judges partitions side by side, as many as there are processors.
func (r *rejudging) judgeAll(groups [][]*rules.Station) error {
	stations := 0
	for _, g := range groups {
		stations += len(g)
	}
	n := min(runtime.GOMAXPROCS(0), len(groups))
	helpers := max(1, runtime.GOMAXPROCS(0)/n)
	r.tally.stations = stations
	todo := make(chan []*rules.Station)
	errs := make(chan error, n)
	stop := make(chan struct{})
	for range n {
		go func() {
			var err error
			for g := range todo {
				if err = r.judgeGroup(g, helpers); err != nil {
					break
				}
			}
			errs <- err
		}()
	}
	go func() {
		defer close(todo)
		for _, g := range groups {
			select {
			case todo <- g:
			case <-stop:
				return
			}
		}
	}()
	var err error
	for range n {
		if e := <-errs; e != nil {
			if err == nil {
				close(stop)
			}
			err = errors.Join(err, e)
		}
	}
	return err
}

// judgeGroup judges the stations of one partition into one draft.
func (r *rejudging) judgeGroup(group []*rules.Station, helpers int) error {
	var draft *store.Draft
	if !r.dryRun {
		var err error
		if draft, err = beginDraft(r.archive, broker.PartitionOf(group[0].ID), r.site); err != nil {
			return err
		}
	}
	last, _, err := r.archive.Last(broker.PartitionOf(group[0].ID))
	if err != nil {
		return err
	}
	owed := last.Owed
	for _, st := range group {
		d, err := r.judgeStation(st, draft, &owed, helpers)
		if err != nil {
			if draft != nil {
				draft.Drop()
			}
			return err
		}
		r.mu.Lock()
		r.diffs = append(r.diffs, d)
		r.mu.Unlock()
	}
	if draft != nil && len(owed) < len(last.Owed) {
		draft.Owe(owed)
	}
	switch {
	case draft == nil:
	case draft.Empty():
		draft.Drop()
	case r.atOnce:
		return r.finish(draft)
	default:
		r.mu.Lock()
		r.drafts = append(r.drafts, draft)
		r.mu.Unlock()
	}
	return nil
}

func (r *rejudging) judgeStation(st *rules.Station, draft *store.Draft, owed *[]store.Owed, helpers int) (difference, error) {
	plan, err := engine.NewPlan(st)
	if err != nil {
		return difference{}, err
	}
	if plan, err = withNotes(r.archive, plan); err != nil {
		return difference{}, err
	}
	p := &pass{archive: r.archive, station: st, plan: plan, from: r.from, to: max(r.to, lastOwed(*owed, st.ID)), trap: r.trap, helpers: helpers, step: r.tally.station(st.ID)}
	p.out = newMonths(r.archive, draft, st.ID)
	p.out.site = r.site
	p.out.reason = func(old []string) string { return cmp.Or(r.reasons.why(st, old), owedReason(owed, st.ID)) }
	err = p.run()
	if errors.Is(err, errNoReadings) {
		err = nil
	}
	if err != nil {
		_ = p.out.stop()
		return difference{}, err
	}
	*owed = stillOwed(*owed, st.ID, p.firstDay)
	return p.out.diff, p.out.stop()
}

// finish keeps the rules and makes a draft count.
func (r *rejudging) finish(draft *store.Draft) error {
	text, err := os.ReadFile(r.siteFile)
	if err == nil {
		err = r.archive.KeepRules(r.site.Digest, text)
	}
	if err != nil {
		draft.Drop()
		return err
	}
	if _, err := draft.Finish(); err != nil {
		return err
	}
	r.mu.Lock()
	r.wrote++
	r.mu.Unlock()
	return nil
}

func (r *rejudging) finishAll() error {
	for len(r.drafts) > 0 {
		d := r.drafts[0]
		r.drafts = r.drafts[1:]
		if err := r.finish(d); err != nil {
			return err
		}
	}
	return nil
}

func (r *rejudging) dropAll() {
	for _, d := range r.drafts {
		d.Drop()
	}
	r.drafts = nil
}

// askYes asks on the terminal.
func askYes(question string) bool {
	fmt.Fprintf(os.Stderr, "%s [y/N] ", question)
	var answer string
	_, _ = fmt.Fscanln(os.Stdin, &answer)
	return strings.EqualFold(answer, "y") || strings.EqualFold(answer, "yes")
}

// A tally adds up how far several stations are.
type tally struct {
	mu       sync.Mutex
	bar      *progress
	stations int
	begun    int
	share    map[string]float64
}

// station gives the function that notes how far one station is.
func (t *tally) station(id string) func(done, of int) {
	t.mu.Lock()
	defer t.mu.Unlock()
	if t.share == nil {
		t.share = map[string]float64{}
	}
	t.begun++
	return func(done, of int) {
		if !t.bar.on {
			return
		}
		t.mu.Lock()
		defer t.mu.Unlock()
		t.share[id] = float64(done) / float64(of)
		sum := 0.0
		for _, s := range t.share {
			sum += s
		}
		t.bar.show(fmt.Sprintf("judging station %d of %d, %s", t.begun, t.stations, id), sum/float64(t.stations))
	}
}
