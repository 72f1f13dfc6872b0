package console

import (
	"fmt"
	"html/template"
	"net/http"
	"slices"
	"strings"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

type faultView struct {
	frame
	Station                      *rules.Station
	Episode                      *fault.Episode
	Entry                        *rules.CatalogueEntry
	Head, From, To, Raised, Sure string
	Evidence                     []evidenceLine
	Also                         []string
	Neighbours                   []neighbour
	Take                         string
	Figure                       template.HTML
	Residual, Day, More          string
	Others                       []episodeLine
	Said                         []string
	SayTo                        string
}

// A neighbour is a kind that this one is confused with, and what tells them apart.
type neighbour struct{ Title, Told string }

type evidenceLine struct{ Name, Value string }

// faultPage shows one episode: what, since when, how sure, the residual that tells it, what to do.
func (c *Console) faultPage(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	id := r.PathValue("fault")
	all, err := c.archive.faults(st.ID)
	if err != nil {
		return err
	}
	k := slices.IndexFunc(all, func(e fault.Episode) bool { return e.ID == id })
	if k < 0 {
		return notFound(fmt.Sprintf("%s has no episode %q", st.ID, id), "It may have been taken back or renamed when more was known; the station's newest day lists what is there.")
	}
	e := &all[k]
	v := faultView{frame: c.frame(r, e.Kind.Entry().Title, stationLink(st.ID), link{Text: e.Instrument + ": " + e.Kind.Entry().Title, Here: true}), Station: st, Episode: e, Entry: e.Kind.Entry(),
		Head: e.Instrument + ": " + e.Kind.Entry().Title, From: minuteName(e.From), To: "still open", Raised: minuteName(e.Raised), Sure: fmt.Sprintf("%.0f %%", 100*e.Confidence),
		Day: dayLink(st.ID, e.From/minute.PerDay)}
	if !openEnded(e) {
		v.To = minuteName(e.To)
	}
	for _, x := range e.Evidence {
		v.Evidence = append(v.Evidence, evidenceLine{strings.ReplaceAll(x.Name, "_", " "), strings.TrimSpace(fmt.Sprintf("%.4g %s", x.Value, prettyUnit(x.Unit)))})
	}
	for _, a := range e.Also {
		v.Also = append(v.Also, a.Entry().Title)
	}
	page := rules.PageOf(e.Kind)
	v.Take = page.Take
	for i, n := range v.Entry.ConfusedWith {
		v.Neighbours = append(v.Neighbours, neighbour{n.Entry().Title, page.Told[i]})
	}
	if v.Figure, v.More, err = c.tellingFigure(st, e); err != nil {
		return err
	}
	if v.More != "" {
		v.Residual = findResidual(residualOf(e.Kind, instrument(st, e.Instrument))).about
	}
	if v.Said, err = c.saidOf(e); err != nil {
		return err
	}
	if c.config.Note != nil {
		v.SayTo = faultLink(e)
	}
	for i := range all {
		if i != k && all[i].From < e.From+7*minute.PerDay && all[i].From > e.From-7*minute.PerDay {
			v.Others = append(v.Others, lineOf(&all[i]))
		}
	}
	return c.render(w, "fault.html", v)
}

func instrument(st *rules.Station, id string) *rules.Instrument {
	for i := range st.Instruments {
		if st.Instruments[i].ID == id {
			return &st.Instruments[i]
		}
	}
	return nil
}

// daysAround is how much of the days before and after an episode its figure shows.
const daysAround = 1

// tellingFigure draws the residual that tells the fault over its days and those around it; the episode is the shaded stretch. Against what the fault
// would do: its neighbours before and after are the sound instrument.
func (c *Console) tellingFigure(st *rules.Station, e *fault.Episode) (template.HTML, string, error) {
	from := e.From/minute.PerDay - daysAround
	to := c.today() + 1
	if !openEnded(e) {
		to = (e.To-1)/minute.PerDay + 1
	}
	to = min(to+daysAround, from+residualDaysMax)
	x := findResidual(residualOf(e.Kind, instrument(st, e.Instrument)))
	s, err := c.residualSeries(st.ID, x, from*minute.PerDay, to*minute.PerDay)
	if err != nil || len(s.values) == 0 {
		return "", "", err
	}
	return s.figure("time", []fault.Episode{*e}), residualLink(st.ID, x.name, dayName(from), dayName(to), "time"), nil
}

func (c *Console) faultsJSON(w http.ResponseWriter, r *http.Request) error {
	st, err := c.station(r)
	if err != nil {
		return err
	}
	all, err := c.archive.faults(st.ID)
	if err != nil {
		return err
	}
	type line struct {
		ID         string  `json:"id"`
		Instrument string  `json:"instrument"`
		Kind       string  `json:"kind"`
		Severity   string  `json:"severity"`
		From       string  `json:"from"`
		To         *string `json:"to"`
		Confidence float64 `json:"confidence"`
		Advice     string  `json:"advice"`
		Page       string  `json:"page"`
	}
	list := []line{}
	for i := range all {
		e := &all[i]
		l := line{e.ID, e.Instrument, e.Kind.String(), e.Severity.String(), minuteName(e.From), nil, e.Confidence, e.Advice, faultLink(e)}
		if !openEnded(e) {
			to := minuteName(e.To)
			l.To = &to
		}
		list = append(list, l)
	}
	writeJSON(w, map[string]any{"station": st.ID, "faults": list})
	return nil
}
