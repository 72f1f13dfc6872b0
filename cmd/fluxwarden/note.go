package main

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"os"
	"regexp"
	"strings"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/rules"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

const noteUsage = `example: fluxwarden note --archive ./archive --station northmoor --instrument G1 --kind cleaning \
           --from 2026-06-21T09:00Z --to 2026-06-21T09:10Z --by "A. Keeper" --text "dust, wiped with water" --domes-cleaned yes

A note is kept for ever. --withdraw ID takes one back by another; --list shows them all.

`

// A noteCommand is the flags of note.
type noteCommand struct {
	note                           rules.Note
	archive, site, url, credential string
	kind, from, to, withdraw       string
	list, asJSON, form             bool
	wait                           time.Duration
}

// cmdNote writes down what a person says of an instrument, or lists what has been said.
func cmdNote(args []string) int {
	c := noteCommand{}
	fs := c.flags()
	if err := fs.Parse(args); err != nil {
		return parseCode(err)
	}
	if fs.NArg() > 0 || c.archive == "" && (c.list || c.url == "") {
		return complain(exitUsage, errors.New("note: want --archive DIR, or --broker URL of a running daemon; fluxwarden note --help shows an example"))
	}
	if c.list {
		if err := c.show(os.Stdout); err != nil {
			return complain(exitProblem, fmt.Errorf("note: %w", err))
		}
		return exitOK
	}
	if c.form {
		c.ask(os.Stdin, os.Stderr)
	}
	if err := c.read(time.Now()); err != nil {
		return complain(exitUsage, err)
	}
	code, err := c.keep()
	if err != nil {
		return complain(code, err)
	}
	return exitOK
}

func (c *noteCommand) flags() *flag.FlagSet {
	fs := flag.NewFlagSet("note", flag.ContinueOnError)
	n := &c.note
	fs.StringVar(&c.archive, "archive", "", "`folder` of the archive; a daemon that has it is found by it")
	fs.StringVar(&c.site, "site", "", "site `file` to hold the note against; otherwise the rules that the archive keeps")
	fs.StringVar(&c.url, "broker", "", "`url` of the daemon's broker, where the archive does not tell it")
	fs.StringVar(&c.credential, "credentials", "", "credentials `file` for the broker")
	fs.DurationVar(&c.wait, "wait", 10*time.Second, "how long to try to reach the daemon")
	fs.StringVar(&n.Station, "station", "", "station that the note is about")
	fs.StringVar(&n.Instrument, "instrument", "", "instrument of the site file, or tracker or logger; the whole station otherwise")
	fs.StringVar(&n.Quantity, "quantity", "", "override: of this quantity")
	fs.StringVar(&c.from, "from", "", "first minute, such as 2026-06-21T09:00Z")
	fs.StringVar(&c.to, "to", "", "first minute that it is no longer about")
	fs.StringVar(&c.kind, "kind", "", "maintenance, cleaning, levelling, exchange, override or remark")
	fs.StringVar(&n.Verdict, "verdict", "", "override: accepted, questioned or rejected")
	fs.StringVar(&n.By, "by", "", "who says so")
	fs.StringVar(&n.Text, "text", "", "what there is to say; an override needs its reason")
	fs.StringVar(&c.withdraw, "withdraw", "", "take back the note with this `id`")
	fs.StringVar(&n.Checklist.DomesCleaned, "domes-cleaned", "", "checklist: yes or no")
	fs.StringVar(&n.Checklist.Level, "level", "", "checklist: ok or adjusted")
	fs.StringVar(&n.Checklist.Desiccant, "desiccant", "", "checklist: ok or changed")
	fs.StringVar(&n.Checklist.CappedZero, "capped-zero", "", "checklist: reading with the dome capped, W/m2")
	fs.StringVar(&n.Checklist.DomeState, "dome-state", "", "checklist: as found: clean, dust, dew, frost, snow, droppings, scratched")
	fs.BoolVar(&c.form, "form", false, "ask for what is not given; an empty answer leaves it out")
	fs.BoolVar(&c.list, "list", false, "list the notes of the archive, or of --station")
	fs.BoolVar(&c.asJSON, "json", false, "list: one JSON object a line")
	fs.Usage = func() { fmt.Fprint(os.Stderr, noteUsage); fs.PrintDefaults() }
	return fs
}

// ask asks for what the flags did not say, one line each.
func (c *noteCommand) ask(in io.Reader, out io.Writer) {
	n := &c.note
	lines := bufio.NewScanner(in)
	for _, q := range []struct {
		to   *string
		text string
	}{
		{&n.Station, "station"}, {&n.Instrument, "instrument (empty: the whole station)"}, {&c.kind, "kind (maintenance, cleaning, levelling, exchange, remark)"},
		{&c.from, "from, UTC (2026-06-21T09:00Z)"}, {&c.to, "to, UTC"}, {&n.Checklist.DomesCleaned, "domes cleaned (yes, no)"},
		{&n.Checklist.Level, "level (ok, adjusted)"}, {&n.Checklist.Desiccant, "desiccant (ok, changed)"}, {&n.Checklist.CappedZero, "capped zero, W/m2"},
		{&n.Checklist.DomeState, "dome as found (clean, dust, dew, frost, snow, droppings, scratched)"}, {&n.Text, "anything else"}, {&n.By, "by"},
	} {
		if *q.to != "" {
			continue
		}
		fmt.Fprintf(out, "%s: ", q.text)
		if !lines.Scan() {
			return
		}
		*q.to = strings.TrimSpace(lines.Text())
	}
}

// read makes the note of the flags.
func (c *noteCommand) read(now time.Time) error {
	n := &c.note
	n.Made = now
	kind := c.kind
	if c.withdraw != "" {
		if kind != "" && kind != rules.Withdrawal.String() {
			return fmt.Errorf("note: kind %s: --withdraw takes back a note and is none of that kind", kind)
		}
		kind, n.Withdraws = rules.Withdrawal.String(), c.withdraw
	}
	if kind == "" {
		return errors.New("note: kind: none; say --kind maintenance, cleaning, levelling, exchange, override or remark")
	}
	if err := n.Kind.UnmarshalText([]byte(kind)); err != nil {
		return fmt.Errorf("note: %w", err)
	}
	for _, x := range []struct {
		name, text string
		to         *time.Time
	}{{"from", c.from, &n.From}, {"to", c.to, &n.To}} {
		if x.text == "" {
			continue
		}
		t, err := noteTime(x.text)
		if err != nil {
			return fmt.Errorf("note: %s %q: want a UTC time such as 2026-06-21T09:00Z", x.name, x.text)
		}
		*x.to = t
	}
	return n.Seal()
}

func noteTime(text string) (t time.Time, err error) {
	for _, form := range []string{"2006-01-02T15:04Z07:00", time.RFC3339} {
		if t, err = time.Parse(form, text); err == nil {
			return t, nil
		}
	}
	return t, err
}

// keep puts the note into the archive, or gives it to the daemon that has it.
func (c *noteCommand) keep() (int, error) {
	if c.archive == "" || c.url != "" {
		if code, err := c.hold(nil); err != nil {
			return code, err
		}
		return exitProblem, c.publish(c.url)
	}
	if _, err := store.Open(vfs.OS{}, c.archive); err != nil { // a note makes no archive
		return exitProblem, fmt.Errorf("note: %w", err)
	}
	a, err := store.OpenForWriting(vfs.OS{}, c.archive, store.Options{Owner: fmt.Sprintf("fluxwarden note, process %d", os.Getpid())})
	var held *vfs.HeldError
	if errors.As(err, &held) {
		return c.throughDaemon(held)
	}
	if err != nil {
		return exitProblem, fmt.Errorf("note: %w", err)
	}
	code, err := c.hold(a)
	if err == nil {
		code, err = exitProblem, c.write(a)
	}
	return code, errors.Join(err, a.Close())
}

var brokerInLock = regexp.MustCompile(`broker (nats://\S+)`)

func (c *noteCommand) throughDaemon(held *vfs.HeldError) (int, error) {
	m := brokerInLock.FindStringSubmatch(held.Text)
	if m == nil {
		return exitProblem, fmt.Errorf("note: archive %s is in use by %s; if that is a daemon, name its broker with --broker", c.archive, held.Text)
	}
	a, err := store.Open(vfs.OS{}, c.archive)
	if err != nil {
		return exitProblem, fmt.Errorf("note: %w", err)
	}
	if code, err := c.hold(a); err != nil {
		return code, err
	}
	return exitProblem, c.publish(m[1])
}

// hold holds the note against the site file, or the rules that the archive keeps, and against the notes there are.
func (c *noteCommand) hold(a *store.Archive) (int, error) {
	n := &c.note
	var site *rules.Site
	var err error
	switch {
	case c.site != "":
		site, err = rules.Load(c.site)
	case a != nil:
		site, err = newestRules(a, broker.PartitionOf(n.Station))
	default:
		return exitOK, nil // the daemon knows its stations
	}
	if err != nil {
		return exitProblem, fmt.Errorf("note: %w", err)
	}
	if err := n.Fits(site.Station(n.Station)); err != nil {
		return exitUsage, err
	}
	if n.Kind != rules.Withdrawal || a == nil {
		return exitOK, nil
	}
	notes, err := a.Notes(n.Station)
	if err != nil {
		return exitProblem, fmt.Errorf("note: %w", err)
	}
	for _, x := range notes {
		if x.ID == n.Withdraws {
			return exitOK, nil
		}
	}
	return exitUsage, fmt.Errorf("note: withdraw %s: station %s has no such note in the archive; fluxwarden note --archive %s --list shows them (a daemon writes new ones with its next commit)",
		n.Withdraws, n.Station, c.archive)
}

// newestRules is the rule set that holds last in an archive: a daemon's schedule says, or the partition's last commit.
func newestRules(a *store.Archive, partition int) (*rules.Site, error) {
	digest := ""
	list, err := a.Schedule()
	if err != nil {
		return nil, err
	}
	last, _, err := a.Last(partition)
	if err != nil {
		return nil, err
	}
	for p := 0; p < store.Partitions && last.RulesDigest == ""; p++ { // the station may be new to the archive, and in no partition's rules alone
		if last, _, err = a.Last(p); err != nil {
			return nil, err
		}
	}
	switch {
	case len(list) > 0:
		digest = list[len(list)-1].Digest
	case last.RulesDigest != "":
		digest = last.RulesDigest
	default:
		return nil, errors.New("the archive has no rules for this station yet; give the site file with --site")
	}
	text, err := a.Rules(digest)
	if err != nil {
		return nil, fmt.Errorf("rules %s are not kept: %w; give the site file with --site", digest, err)
	}
	return rules.Parse(digest, text)
}

// write commits the note, with the days that it changes as days that are owed.
func (c *noteCommand) write(a *store.Archive) error {
	n := &c.note
	notes, err := a.Notes(n.Station)
	if err != nil {
		return err
	}
	for _, x := range notes {
		if x.ID == n.ID {
			c.say()
			fmt.Fprintf(os.Stderr, "it was written before, on %s\n", x.Made.Format(time.RFC3339))
			return nil
		}
	}
	days, err := daysWithRows(a, n.Station)
	if err != nil {
		return err
	}
	touched := store.NoteDays(n, notes, days)
	commit, err := noteCommit(a, n, touched)
	if err != nil {
		return err
	}
	if _, err := a.Commit(commit); err != nil {
		return err
	}
	c.say()
	if len(touched) > 0 {
		fmt.Fprintf(os.Stderr, "it touches %d judged days: fluxwarden rejudge shows what it changes and writes it, a daemon does it by itself\n", len(touched))
	}
	return nil
}

// say prints the note's id, by which it can be withdrawn.
func (c *noteCommand) say() {
	n := &c.note
	fmt.Fprintf(os.Stdout, "note %s: %s of %s, by %s\n", n.ID, n.Kind, strings.TrimSpace(n.Station+" "+n.Instrument), n.By)
}

func noteCommit(a *store.Archive, n *rules.Note, touched []int64) (*store.Commit, error) {
	p := broker.PartitionOf(n.Station)
	last, ok, err := a.Last(p)
	if err != nil {
		return nil, err
	}
	c := &store.Commit{Partition: p, Program: "fluxwarden " + version, Time: time.Now(), Notes: []rules.Note{*n}}
	if ok {
		c.Base, c.Epoch, c.Positions, c.RulesDigest = last.Number, last.Epoch, last.Positions, last.RulesDigest
	}
	if len(touched) > 0 {
		c.Owed = append(append(c.Owed, last.Owed...), store.OweDays(n.Station, store.NoteReason(n), touched))
	}
	return c, nil
}

// publish gives the note to the daemon behind a broker.
func (c *noteCommand) publish(url string) error {
	ctx, cancel := context.WithTimeout(context.Background(), c.wait)
	defer cancel()
	b, err := broker.Connect(broker.ConnectSettings{URL: url, Credentials: c.credential, Name: "fluxwarden note"})
	if err != nil {
		return fmt.Errorf("note: %w", err)
	}
	defer b.Close()
	text, err := json.Marshal(&c.note)
	if err != nil {
		return err
	}
	if err := b.PublishChange(ctx, broker.PartitionOf(c.note.Station), text); err != nil {
		return fmt.Errorf("note: %s: %w; nothing was written", url, err)
	}
	c.say()
	fmt.Fprintln(os.Stderr, "it is with the daemon, which judges its days again by itself")
	return nil
}
