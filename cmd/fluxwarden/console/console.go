// Package console shows the network to people: pages that a browser opens, the same as JSON for scripts, and a printable report of a month. It only
// reads. Pages are made on the server and work without script; a little script of our own adds live rows, a read-out under the pointer and zoom.
package console

import (
	"bytes"
	"compress/gzip"
	"context"
	"embed"
	"fmt"
	"html/template"
	"io/fs"
	"net/http"
	"strings"
	"sync"
	"time"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
	"fluxwarden/store"
)

//go:embed look pages
var files embed.FS

// A Config is what pages are made from.
type Config struct {
	Archive func(func(a *store.Archive) error) error // runs a function on the archive; Of makes one
	Site    func() *rules.Site                       // the rules in force; nil where only an archive is looked at
	Now     func() time.Time
	Trouble func() string                                  // why the daemon is not ready, empty if it is; may be nil
	People  string                                         // file of who may sign in; empty is nobody
	Note    func(ctx context.Context, n *rules.Note) error // keeps a note; nil where none can be written
	Failed  func()                                         // told of a page that could not be made; may be nil
	Program string
}

// A Console serves the pages. It is told of judged minutes and episodes by Minutes and Episodes.
type Console struct {
	config  Config
	archive library
	pages   *template.Template
	live    live
	signed  signIns

	mu     sync.Mutex
	states map[string]*stationState
}

// New makes a console; it reads nothing yet.
func New(c Config) *Console {
	if c.Now == nil {
		c.Now = time.Now
	}
	if c.Site == nil {
		empty := &rules.Site{}
		c.Site = func() *rules.Site { return empty }
	}
	return &Console{config: c, archive: library{c.Archive}, pages: template.Must(template.New("").Funcs(template.FuncMap{"words": inWords}).ParseFS(files, "pages/*.html")), states: map[string]*stationState{}}
}

// Handler gives all that the console serves.
func (c *Console) Handler() http.Handler {
	mux := http.NewServeMux()
	look, _ := fs.Sub(files, "look")
	mux.Handle("GET /look/", http.StripPrefix("/look/", unchanging(http.FileServerFS(look))))
	for pattern, page := range map[string]func(http.ResponseWriter, *http.Request) error{
		"GET /{$}":                                c.networkPage,
		"GET /station/{station}":                  c.stationPage,
		"GET /station/{station}/day/{day}":        c.dayPage,
		"GET /station/{station}/year/{year}":      c.yearPage,
		"GET /station/{station}/fault/{fault}":    c.faultPage,
		"GET /station/{station}/residual":         c.residualPage,
		"GET /station/{station}/report/{month}":   c.reportPage,
		"GET /sign-in":                            c.signInPage,
		"POST /sign-in":                           c.signInPost,
		"POST /sign-out":                          c.signOutPost,
		"POST /station/{station}/note":            c.notePost,
		"POST /station/{station}/fault/{fault}":   c.faultPost,
		"GET /api/v1/network":                     c.networkJSON,
		"GET /api/v1/station/{station}/day/{day}": c.dayJSON,
		"GET /api/v1/station/{station}/faults":    c.faultsJSON,
		"GET /api/v1/station/{station}/residual":  c.residualJSON,
		"GET /station/{station}/day/{day}/{file}": c.dayFile,
		"GET /": func(_ http.ResponseWriter, r *http.Request) error {
			return notFound("there is no page "+r.URL.Path, "Begin at the network page.")
		},
	} {
		if strings.HasPrefix(pattern, "POST ") {
			page = small(page)
		}
		mux.HandleFunc(pattern, func(w http.ResponseWriter, r *http.Request) { c.serve(w, r, page) })
	}
	mux.HandleFunc("GET /live", c.liveEvents)
	return secure(http.NewCrossOriginProtection().Handler(mux))
}

// formMax is the most that a form may carry, in bytes.
const formMax = 64 << 10

// small bounds what a form may send.
func small(page func(http.ResponseWriter, *http.Request) error) func(http.ResponseWriter, *http.Request) error {
	return func(w http.ResponseWriter, r *http.Request) error {
		r.Body = http.MaxBytesReader(nil, r.Body, formMax)
		if err := r.ParseForm(); err != nil {
			return badInput("the form cannot be read", "Send it again from the page.")
		}
		return page(w, r)
	}
}

// secure sets what a browser is told of what a page may do: nothing from elsewhere, no frames, no inline script.
func secure(h http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		head := w.Header()
		head.Set("Content-Security-Policy", "default-src 'none'; style-src 'self'; script-src 'self'; img-src 'self'; connect-src 'self'; form-action 'self'; base-uri 'none'; frame-ancestors 'none'")
		head.Set("X-Content-Type-Options", "nosniff")
		head.Set("Referrer-Policy", "same-origin")
		head.Set("Cross-Origin-Opener-Policy", "same-origin")
		h.ServeHTTP(w, r)
	})
}

func unchanging(h http.Handler) http.Handler {
	return http.HandlerFunc(func(w http.ResponseWriter, r *http.Request) {
		w.Header().Set("Cache-Control", "max-age=300")
		h.ServeHTTP(w, r)
	})
}

// A problem is an answer that says what is wrong and what to do.
type problem struct {
	code       int
	what, mend string
}

func (p *problem) Error() string { return p.what + ". " + p.mend }

func notFound(what, mend string) error { return &problem{http.StatusNotFound, what, mend} }
func badInput(what, mend string) error { return &problem{http.StatusBadRequest, what, mend} }
func isJSON(r *http.Request) bool      { return strings.HasPrefix(r.URL.Path, "/api/") }
func (c *Console) now() time.Time      { return c.config.Now().UTC() }
func openEnded(e *fault.Episode) bool  { return e.To == fault.Open }
func (c *Console) trouble() (why string) {
	if c.config.Trouble != nil {
		why = c.config.Trouble()
	}
	return why
}

// serve makes a page whole before it sends a byte, so that an error in the middle is told as one.
func (c *Console) serve(w http.ResponseWriter, r *http.Request, page func(http.ResponseWriter, *http.Request) error) {
	held := &heldAnswer{ResponseWriter: w, code: http.StatusOK}
	err := page(held, r)
	if err != nil {
		p, ok := err.(*problem)
		if !ok {
			p = &problem{http.StatusInternalServerError, "this could not be read: " + err.Error(), "Try again; if it stays, run fluxwarden verify on the archive."}
			if c.config.Failed != nil {
				c.config.Failed()
			}
		}
		held.body.Reset()
		held.code = p.code
		if isJSON(r) {
			writeJSON(held, map[string]string{"error": p.what, "mend": p.mend})
		} else {
			c.render(held, "problem.html", struct {
				frame
				What, Mend string
			}{c.frame(r, http.StatusText(p.code)), p.what, p.mend})
		}
	}
	held.send(r)
}

// A heldAnswer keeps the body until it is complete and compresses it where the browser can read that.
type heldAnswer struct {
	http.ResponseWriter
	body bytes.Buffer
	code int
}

func (h *heldAnswer) Write(b []byte) (int, error) { return h.body.Write(b) }
func (h *heldAnswer) WriteHeader(code int)        { h.code = code }

// packers compress quickly rather than well: a page is made for one look.
var packers = sync.Pool{New: func() any {
	z, _ := gzip.NewWriterLevel(nil, gzip.BestSpeed) // the level is a valid one
	return z
}}

func (h *heldAnswer) send(r *http.Request) {
	head := h.Header()
	if head.Get("Content-Type") == "" {
		head.Set("Content-Type", "text/html; charset=utf-8")
	}
	head.Set("Vary", "Accept-Encoding")
	if h.body.Len() > 1000 && strings.Contains(r.Header.Get("Accept-Encoding"), "gzip") {
		head.Set("Content-Encoding", "gzip")
		h.ResponseWriter.WriteHeader(h.code)
		z := packers.Get().(*gzip.Writer)
		defer packers.Put(z)
		z.Reset(h.ResponseWriter)
		_, _ = z.Write(h.body.Bytes())
		_ = z.Close() // who has gone away meanwhile misses nothing
		return
	}
	h.ResponseWriter.WriteHeader(h.code)
	_, _ = h.ResponseWriter.Write(h.body.Bytes())
}

// A frame is what every page has around its matter.
type frame struct {
	Title, Network, Now, Program, Trouble string
	Trail                                 []link
	Patterns                              template.HTML
	SignedIn, Form                        string // who is signed in, and the secret of the session's forms
	CanSignIn                             bool
	Here                                  string
}

type link struct {
	Text, To string
	Here     bool
}

func (c *Console) frame(r *http.Request, title string, trail ...link) frame {
	network := c.config.Site().Network.Name
	if network == "" {
		network = "fluxwarden"
	}
	s, _ := c.signedIn(r)
	return frame{SignedIn: s.name, Form: s.form, CanSignIn: c.config.People != "", Here: r.URL.RequestURI(), Title: title, Network: network, Now: c.now().Format("2006-01-02 15:04Z"), Program: c.config.Program, Trouble: c.trouble(),
		Trail: append([]link{{Text: network, To: "/"}}, trail...), Patterns: patterns}
}

func (c *Console) render(w http.ResponseWriter, name string, data any) error {
	if err := c.pages.ExecuteTemplate(w, name, data); err != nil {
		return fmt.Errorf("page %s: %w", name, err)
	}
	return nil
}
