package main

import (
	"errors"
	"flag"
	"fmt"
	"io"
	"math"
	"os"
	"runtime"
	"slices"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

// cmdJudge puts files of readings through the core that run uses, into the same archive.
func cmdJudge(args []string) int {
	fs := flag.NewFlagSet("judge", flag.ContinueOnError)
	site := fs.String("site", "", "site file")
	archive := fs.String("archive", "", "folder of the archive; made if it is not there")
	station := fs.String("station", "", "station that the readings are of; needed where the site file has several")
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if *site == "" || *archive == "" || fs.NArg() == 0 {
		return complain(exitUsage, errors.New("judge: want --site FILE --archive DIR and at least one file of readings"))
	}
	s, err := rules.Load(*site)
	if err != nil {
		return complain(exitUsage, err)
	}
	st, err := pickStation(s, *station)
	if err != nil {
		return complain(exitUsage, fmt.Errorf("judge: %w", err))
	}
	code, err := judgeFiles(*archive, s, st, *site, fs.Args())
	if err != nil {
		return complain(exitProblem, fmt.Errorf("judge: %w", err))
	}
	return code
}

// pickStation gives the station of an id, or the only one.
func pickStation(s *rules.Site, id string) (*rules.Station, error) {
	if id == "" {
		if len(s.Stations) == 1 {
			return &s.Stations[0], nil
		}
		return nil, fmt.Errorf("the site file has %d stations: say which with --station", len(s.Stations))
	}
	if st := s.Station(id); st != nil {
		return st, nil
	}
	return nil, fmt.Errorf("the site file has no station %q", id)
}

// judgeFiles reads all files first: where they cannot be read no archive is made or touched.
func judgeFiles(archive string, s *rules.Site, st *rules.Station, siteFile string, files []string) (int, error) {
	bar := newProgress(len(files))
	defer bar.done()
	var all minute.Batch
	refused := 0
	for _, name := range files {
		n, err := readReadings(&all, st, name, bar)
		if err != nil {
			return exitProblem, err
		}
		refused += n
	}
	if all.Rows() == 0 {
		return exitProblem, fmt.Errorf("%s: no reading could be taken; the archive is unchanged", files[0])
	}
	text, err := os.ReadFile(siteFile)
	if err != nil {
		return exitProblem, err
	}
	a, err := store.OpenForWriting(vfs.OS{}, archive, store.Options{Owner: fmt.Sprintf("fluxwarden judge, process %d", os.Getpid())})
	if err != nil {
		return exitProblem, err
	}
	defer a.Close()
	if err := a.KeepRules(s.Digest, text); err != nil {
		return exitProblem, err
	}
	all.Station = st.ID
	p, err := judgeBatch(a, s, st, &all, bar)
	if err != nil {
		return exitProblem, err
	}
	bar.done()
	fmt.Fprintf(os.Stderr, "judged %d minutes of %s on %d days; %d episodes\n", p.minutes, st.ID, p.days, len(p.episodes))
	if refused > 0 {
		fmt.Fprintf(os.Stderr, "fluxwarden: judge: %d lines were refused; the rest is in the archive\n", refused)
		return exitProblem, nil
	}
	return exitOK, nil
}

// judgeBatch judges the days that new readings touch, those that hindsight may reach, and all later ones, and commits what comes of it
// with the readings: all or nothing.
func judgeBatch(a *store.Archive, s *rules.Site, st *rules.Station, all *minute.Batch, bar *progress) (*pass, error) {
	plan, err := engine.NewPlan(st)
	if err != nil {
		return nil, err
	}
	if plan, err = withNotes(a, plan); err != nil {
		return nil, err
	}
	p := &pass{archive: a, station: st, plan: plan, fresh: map[int64]*minute.Batch{}, to: math.MaxInt64, helpers: runtime.GOMAXPROCS(0), step: bar.step}
	parts, err := dropKnown(a, st.ID, splitByDay(all))
	if err != nil {
		return nil, err
	}
	for _, x := range parts {
		p.fresh[x.Day] = x.Batch
	}
	p.from = minute.NewGatherer(plan.Layout()).Days(all)[0]
	if p.from, err = firstUnended(a, st.ID, p.from); err != nil {
		return nil, err
	}
	draft, err := beginDraft(a, broker.PartitionOf(st.ID), s)
	if err != nil {
		return nil, err
	}
	p.out = newMonths(a, draft, st.ID)
	p.out.site = s
	p.out.raw(parts)
	if err := p.run(); err != nil {
		_ = p.out.stop()
		draft.Drop()
		return nil, err
	}
	last, _, err := a.Last(broker.PartitionOf(st.ID))
	if err != nil {
		draft.Drop()
		return nil, err
	}
	if owed := stillOwed(last.Owed, st.ID, p.firstDay); len(owed) < len(last.Owed) {
		draft.Owe(owed)
	}
	_, err = draft.Finish()
	return p, err
}

// firstUnended is the day, or the earlier one that the archive has readings of but no summary: it was the last, and was left open.
func firstUnended(a *store.Archive, station string, day int64) (int64, error) {
	if !slices.Contains(a.Stations(), station) {
		return day, nil
	}
	last := int64(math.MinInt64)
	err := a.EachSummary(station, math.MinInt32, day, func(s store.Summary) error { last = s.Day; return nil })
	if err != nil || last == math.MinInt64 {
		return math.MinInt32, err
	}
	return min(day, last+1), nil
}

// beginDraft starts a commit of a partition that stands on its last record.
func beginDraft(a *store.Archive, partition int, s *rules.Site) (*store.Draft, error) {
	c := store.Commit{Partition: partition, RulesDigest: s.Digest, Program: "fluxwarden " + version, Time: time.Now(), Site: s}
	last, ok, err := a.Last(partition)
	if err != nil {
		return nil, err
	}
	if ok {
		c.Base, c.Epoch, c.Positions = last.Number, last.Epoch, last.Positions
	}
	return a.Begin(&c)
}

// readReadings adds a file's readings to all and prints the lines it could not take.
func readReadings(all *minute.Batch, st *rules.Station, name string, bar *progress) (refused int, err error) {
	f, err := os.Open(name)
	if err != nil {
		return 0, err
	}
	defer f.Close()
	if info, err := f.Stat(); err == nil {
		bar.file(info.Size())
	}
	c, err := wire.NewCSV(bar.reader(f), wire.CSVOptions{Name: name, Station: st.ID})
	if err != nil {
		return 0, err
	}
	if err := warnOfColumns(os.Stderr, name, c, st); err != nil {
		return 0, err
	}
	for {
		var b minute.Batch
		err := c.Next(&b)
		if err == io.EOF {
			break
		}
		if err != nil {
			return 0, err
		}
		joinBatch(all, &b)
	}
	kept, count := c.Refused()
	for i := range kept[:min(len(kept), 10)] {
		fmt.Fprintf(os.Stderr, "refused: %v\n", &kept[i])
	}
	if count > 10 {
		fmt.Fprintf(os.Stderr, "refused: and %d more lines of %s\n", count-10, name)
	}
	return count, nil
}

// joinBatch appends b's rows to all.
func joinBatch(all, b *minute.Batch) {
	if all.Rows() == 0 {
		*all = *b
		return
	}
	same := len(all.Channels) == len(b.Channels) && all.Received == nil && b.Received == nil && all.Ahead == nil && b.Ahead == nil
	for i := range all.Channels {
		same = same && all.Channels[i].Name == b.Channels[i].Name && all.Channels[i].Stats == nil && b.Channels[i].Stats == nil
	}
	if !same {
		for i := range b.Rows() {
			r := b.Reading(i)
			all.Append(&r)
		}
		return
	}
	all.At = append(all.At, b.At...)
	for i := range all.Channels {
		all.Channels[i].Mean = append(all.Channels[i].Mean, b.Channels[i].Mean...)
	}
}

// splitByDay cuts a batch into parts of one UTC day of stamps each, ascending. Parts of a batch in order of time share its memory.
func splitByDay(b *minute.Batch) []store.RawPart {
	var parts []store.RawPart
	if slices.IsSorted(b.At) {
		for from := 0; from < b.Rows(); {
			day := b.At[from].Day()
			to, _ := slices.BinarySearch(b.At, minute.Stamp((day+1)*minute.MicrosPerDay))
			parts = append(parts, store.RawPart{Day: day, Batch: cutBatch(b, from, to)})
			from = to
		}
		return parts
	}
	byDay := map[int64]*minute.Batch{}
	for i := range b.Rows() {
		day := b.At[i].Day()
		if byDay[day] == nil {
			byDay[day] = &minute.Batch{Station: b.Station}
		}
		r := b.Reading(i)
		byDay[day].Append(&r)
	}
	for day, part := range byDay {
		parts = append(parts, store.RawPart{Day: day, Batch: part})
	}
	slices.SortFunc(parts, func(x, y store.RawPart) int { return int(x.Day - y.Day) })
	return parts
}

func cutBatch(b *minute.Batch, from, to int) *minute.Batch {
	out := &minute.Batch{Station: b.Station, At: b.At[from:to], Channels: make([]minute.Channel, len(b.Channels))}
	if b.Received != nil {
		out.Received = b.Received[from:to]
	}
	if b.Ahead != nil {
		out.Ahead = b.Ahead[from:to]
	}
	for i := range b.Channels {
		c := &b.Channels[i]
		out.Channels[i] = minute.Channel{Name: c.Name, Mean: c.Mean[from:to]}
		if s := c.Stats; s != nil {
			out.Channels[i].Stats = &minute.Stats{SD: s.SD[from:to], Min: s.Min[from:to], Max: s.Max[from:to], N: s.N[from:to]}
		}
	}
	return out
}
