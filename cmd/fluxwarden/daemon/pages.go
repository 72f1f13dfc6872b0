package daemon

import (
	"context"
	"fmt"
	"html/template"
	"net/http"
	"time"

	"github.com/prometheus/client_golang/prometheus/promhttp"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
)

// handler serves metrics, health and the status page.
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
	mux.HandleFunc("GET /{$}", d.status)
	return mux
}

func (d *Daemon) status(w http.ResponseWriter, _ *http.Request) {
	w.Header().Set("Content-Type", "text/html; charset=utf-8")
	w.Header().Set("Content-Security-Policy", "default-src 'none'; style-src 'unsafe-inline'")
	if err := statusPage.Execute(w, d.statusData()); err != nil {
		d.metrics.Failed("http")
	}
}

type statusData struct {
	Network, Archive, Program, Now, NotReady string
	Stations                                 []statusStation
}

type statusStation struct {
	ID, Name, Last string
	Shares         []string
	Faults         []string
}

func (d *Daemon) statusData() statusData {
	site := d.rules.newest()
	data := statusData{Network: site.Network.Name, Archive: d.config.Settings.Archive, Program: d.config.Program,
		Now: d.config.Clock.Now().UTC().Format(time.RFC3339), NotReady: d.NotReady()}
	_, states := d.hub.view()
	for i := range site.Stations {
		st := states[site.Stations[i].ID]
		row := statusStation{ID: site.Stations[i].ID, Name: site.Stations[i].Name, Last: "none yet"}
		if !st.Last.IsZero() {
			row.Last = st.Last.Add(-time.Minute).Format("2006-01-02 15:04") + "Z"
		}
		total := int64(0)
		for _, n := range st.Verdicts {
			total += n
		}
		for _, v := range []rules.Verdict{rules.Accepted, rules.Questioned, rules.Rejected, rules.Absent} {
			share := "–"
			if total > 0 {
				share = fmt.Sprintf("%.1f %%", 100*float64(st.Verdicts[v])/float64(total))
			}
			row.Shares = append(row.Shares, share)
		}
		for k := range st.Open {
			row.Faults = append(row.Faults, InWords(&st.Open[k]))
		}
		data.Stations = append(data.Stations, row)
	}
	return data
}

// InWords says what an episode means for a person.
func InWords(e *fault.Episode) string {
	s := fmt.Sprintf("%s: %s since %s", e.Instrument, e.Kind.Entry().Title, time.Unix(60*e.From, 0).UTC().Format("2006-01-02 15:04Z"))
	if e.To != fault.Open {
		s += time.Unix(60*e.To, 0).UTC().Format(" until 2006-01-02 15:04Z")
	}
	if e.Advice != "" {
		s += ". " + e.Advice
	}
	return s
}

var statusPage = template.Must(template.New("status").Parse(`<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta http-equiv="refresh" content="30"><title>{{.Network}}: fluxwarden</title>
<style>body{font:16px/1.5 sans-serif;margin:2em;max-width:70em}table{border-collapse:collapse}th,td{text-align:left;padding:.3em 1em .3em 0;border-bottom:1px solid #ccc;vertical-align:top}td.n,th.n{text-align:right}</style></head>
<body><h1>{{.Network}}</h1>
<p>{{.Now}}. {{if .NotReady}}<strong>Not ready: {{.NotReady}}</strong>{{else}}Readings are taken, judged and stored.{{end}}</p>
<table><tr><th>Station</th><th>Last minute</th><th class="n">accepted</th><th class="n">questioned</th><th class="n">rejected</th><th class="n">absent</th><th>What is wrong</th></tr>
{{range .Stations}}<tr><td>{{.Name}} ({{.ID}})</td><td>{{.Last}}</td>{{range .Shares}}<td class="n">{{.}}</td>{{end}}<td>{{range .Faults}}<div>{{.}}</div>{{else}}nothing known{{end}}</td></tr>
{{end}}</table>
<p>Verdict shares are of the radiation minutes judged since the program started. The archive is in <code>{{.Archive}}</code>: Parquet, readable by any engine.
<a href="/metrics">Metrics</a>. {{.Program}}.</p></body></html>
`))

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
