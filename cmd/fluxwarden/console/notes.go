package console

import (
	"fmt"
	"net/http"
	"net/url"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// A noteLine is a note as a page shows it.
type noteLine struct{ Words, By, Made string }

// notesOf gives the notes that reach into a stretch, in the order of their beginning; a withdrawn one says so.
func (c *Console) notesOf(station string, from, to int64) ([]noteLine, error) {
	all, err := c.archive.notes(station)
	if err != nil {
		return nil, err
	}
	var list []noteLine
	for i := range all {
		n := &all[i]
		if n.Kind == rules.Withdrawal || n.From.Unix() >= to*60 || n.To.Unix() <= from*60 {
			continue
		}
		list = append(list, lineOfNote(n, all))
	}
	return list, nil
}

func lineOfNote(n *rules.Note, all []rules.Note) noteLine {
	l := noteLine{By: n.By, Made: n.Made.Format("2006-01-02 15:04Z")}
	where := n.Instrument
	if where == "" {
		where = "the station"
	}
	l.Words = fmt.Sprintf("%s of %s, %s to %s", n.Kind, where, n.From.Format("2006-01-02 15:04Z"), n.To.Format("2006-01-02 15:04Z"))
	if n.Verdict != "" {
		l.Words += ", verdict " + n.Verdict
	}
	for _, x := range [][2]string{{"domes cleaned", n.Checklist.DomesCleaned}, {"level", n.Checklist.Level}, {"desiccant", n.Checklist.Desiccant}, {"capped zero", n.Checklist.CappedZero},
		{"dome as found", n.Checklist.DomeState}} {
		if x[1] != "" {
			l.Words += "; " + x[0] + " " + x[1]
		}
	}
	if n.Text != "" {
		l.Words += ": " + n.Text
	}
	for i := range all {
		if all[i].Withdraws == n.ID {
			l.Words = "withdrawn by " + all[i].By + ": " + l.Words
		}
	}
	return l
}

// noteOf reads a note from a form.
func noteOf(r *http.Request, station, by string, now time.Time) (*rules.Note, error) {
	get := func(key string) string { return strings.TrimSpace(r.PostFormValue(key)) }
	kind, ok := rules.ParseNoteKind(get("kind"))
	if !ok || kind == rules.Withdrawal {
		return nil, badInput(fmt.Sprintf("%q is not a kind of note", get("kind")), "Choose one of the list.")
	}
	n := &rules.Note{Station: station, Instrument: get("instrument"), Kind: kind, By: by, Text: get("text"), Made: now, Verdict: get("verdict"),
		Checklist: rules.Checklist{DomesCleaned: get("domes_cleaned"), Level: get("level"), Desiccant: get("desiccant"), CappedZero: get("capped_zero"), DomeState: get("dome_state")}}
	if kind != rules.Override {
		n.Verdict = ""
	}
	var err1, err2 error
	n.From, err1 = formTime(get("from"))
	n.To, err2 = formTime(get("to"))
	if err1 != nil || err2 != nil {
		return nil, badInput("the times of the note cannot be read", "Write them as 2026-06-21T09:00, UTC.")
	}
	return n, nil
}

// formTime reads a time as browsers send it, or RFC 3339 to the minute; it is UTC.
func formTime(text string) (time.Time, error) {
	return time.Parse("2006-01-02T15:04", strings.TrimSuffix(text, "Z"))
}

// notePost keeps a note that a signed-in person wrote.
func (c *Console) notePost(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	by, err := c.author(r)
	if err != nil {
		return err
	}
	n, err := noteOf(r, st.ID, by, c.now())
	if err != nil {
		return err
	}
	if err := c.keep(r, st, n); err != nil {
		return err
	}
	return seeOther(w, dayLink(st.ID, n.From.Unix()/86400)+"?kept="+n.ID)
}

// keep seals a note and hands it to who keeps them.
func (c *Console) keep(r *http.Request, st *rules.Station, n *rules.Note) error {
	if c.config.Note == nil {
		return notFound("notes cannot be written here", "These pages only read an archive; use fluxwarden note.")
	}
	if err := n.Seal(); err != nil {
		return badInput(err.Error(), "Change it and send it again.")
	}
	if err := n.Fits(st); err != nil {
		return badInput(err.Error(), "Choose an instrument of this station.")
	}
	if err := c.config.Note(r.Context(), n); err != nil {
		return fmt.Errorf("the note could not be kept: %w", err)
	}
	return nil
}

// What a person may say of an episode. It is kept as a remark that names the episode, so it stands in the archive like any note and is never lost.
const (
	saidSeen  = "seen"
	saidWrong = "told wrongly"
)

func remarkHead(what string, e *fault.Episode) string { return what + ", episode " + e.ID }

// faultPost takes an acknowledgement, or that an episode was told wrongly.
func (c *Console) faultPost(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	by, err := c.author(r)
	if err != nil {
		return err
	}
	all, err := c.archive.faults(st.ID)
	if err != nil {
		return err
	}
	k := slices.IndexFunc(all, func(e fault.Episode) bool { return e.ID == r.PathValue("fault") })
	if k < 0 {
		return notFound("there is no such episode any more", "It may have been renamed; the station's newest day lists what is there.")
	}
	e := &all[k]
	what := r.PostFormValue("say")
	if what != saidSeen && what != saidWrong {
		return badInput(fmt.Sprintf("%q cannot be said of an episode", what), "Say seen or told wrongly.")
	}
	text := remarkHead(what, e)
	if why := strings.TrimSpace(r.PostFormValue("text")); why != "" {
		text += ": " + why
	}
	now := c.now()
	n := &rules.Note{Station: st.ID, Kind: rules.Remark, By: by, Text: text, Made: now, From: time.Unix(60*e.From, 0).UTC(), To: time.Unix(60*e.From+60, 0).UTC()}
	if err := c.keep(r, st, n); err != nil {
		return err
	}
	return seeOther(w, faultLink(e))
}

// saidOf gives what people said of an episode.
func (c *Console) saidOf(e *fault.Episode) ([]string, error) {
	all, err := c.archive.notes(e.Station)
	if err != nil {
		return nil, err
	}
	var list []string
	for i := range all {
		n := &all[i]
		if n.Kind != rules.Remark || !strings.Contains(n.Text, "episode "+e.ID) {
			continue
		}
		what, _, _ := strings.Cut(n.Text, ", episode ")
		_, why, _ := strings.Cut(n.Text, e.ID)
		list = append(list, fmt.Sprintf("%s by %s on %s%s", what, n.By, n.Made.Format("2006-01-02 15:04Z"), why))
	}
	return list, nil
}

func noteLink(station string) string { return "/station/" + url.PathEscape(station) + "/note" }
