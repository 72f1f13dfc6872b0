package console

import (
	"context"
	"encoding/json"
	"errors"
	"flag"
	"net/http/httptest"
	"os"
	"os/exec"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/chromedp/cdproto/emulation"
	"github.com/chromedp/cdproto/input"
	"github.com/chromedp/cdproto/runtime"
	"github.com/chromedp/chromedp"
	"github.com/chromedp/chromedp/kb"

	"fluxwarden/rules"
)

var (
	screenshots = flag.String("screenshots", "", "folder that the browser tests write pictures to")
	checker     = flag.String("axe", "", "axe.min.js of the npm package axe-core, which checks labels and contrast")
)

// browser starts the distribution's Chromium with a window of the size given.
func browser(t *testing.T, wide, high int) context.Context {
	t.Helper()
	name := ""
	for _, n := range []string{"chromium", "chromium-browser", "google-chrome"} {
		if p, err := exec.LookPath(n); err == nil {
			name = p
			break
		}
	}
	if name == "" && os.Getenv("FLUXWARDEN_TOOLS") == "must" {
		t.Fatal("no Chromium here, and FLUXWARDEN_TOOLS=must asks for it")
	}
	if name == "" {
		t.Skip("no Chromium here: the pages were not looked at in a browser; apt-get install chromium")
	}
	options := append(slices.Clone(chromedp.DefaultExecAllocatorOptions[:]), chromedp.ExecPath(name), chromedp.NoSandbox, chromedp.WindowSize(wide, high), chromedp.WSURLReadTimeout(2*time.Minute))
	ctx, cancel := chromedp.NewExecAllocator(context.Background(), options...)
	t.Cleanup(cancel)
	ctx, cancel = chromedp.NewContext(ctx)
	t.Cleanup(cancel)
	ctx, cancel = context.WithTimeout(ctx, 10*time.Minute)
	t.Cleanup(cancel)
	return ctx
}

// awaited waits for a promise.
func awaited(p *runtime.EvaluateParams) *runtime.EvaluateParams { return p.WithAwaitPromise(true) }

// A noteBox is who keeps notes in these tests.
type noteBox struct {
	mu    sync.Mutex
	notes []rules.Note
}

func (b *noteBox) keep(_ context.Context, n *rules.Note) error {
	b.mu.Lock()
	defer b.mu.Unlock()
	b.notes = append(b.notes, *n)
	return nil
}

func (b *noteBox) last() (n rules.Note, ok bool) {
	b.mu.Lock()
	defer b.mu.Unlock()
	if len(b.notes) == 0 {
		return n, false
	}
	return b.notes[len(b.notes)-1], true
}

func served(t *testing.T) (*Console, *noteBox, string) {
	t.Helper()
	c, box := keptConsole(t), &noteBox{}
	if err := c.Warm(context.Background()); err != nil {
		t.Fatal(err)
	}
	c.config.Note, c.config.People = box.keep, filepath.Join(t.TempDir(), "people.yaml")
	people := &People{}
	if err := people.Set("anna", "a long enough word"); err != nil {
		t.Fatal(err)
	}
	if err := people.Write(c.config.People); err != nil {
		t.Fatal(err)
	}
	s := httptest.NewServer(c.Handler())
	t.Cleanup(s.Close)
	return c, box, s.URL
}

func run(t *testing.T, ctx context.Context, what string, actions ...chromedp.Action) {
	t.Helper()
	if err := chromedp.Run(ctx, actions...); err != nil {
		t.Fatalf("%s: %v", what, err)
	}
}

func picture(t *testing.T, ctx context.Context, name string) {
	t.Helper()
	if *screenshots == "" {
		return
	}
	var png []byte
	run(t, ctx, "picture", chromedp.FullScreenshot(&png, 100))
	if err := os.WriteFile(filepath.Join(*screenshots, name+".png"), png, 0o644); err != nil {
		t.Fatal(err)
	}
}

// A scientist opens the network page, sees a row change as minutes are judged, goes to a day, reads a minute under the pointer and zooms.
func TestBrowserLooksAround(t *testing.T) {
	c, _, url := served(t)
	ctx := browser(t, 1200, 900)
	var text string
	run(t, ctx, "first load", chromedp.Navigate(url+"/"), chromedp.WaitVisible("#s-northmoor"), chromedp.Poll(`document.querySelector("#link").textContent === "live"`, nil))
	picture(t, ctx, "network")
	day := laterThatDay.Unix()/86400 + 1
	c.Minutes(judgedMinutes("northmoor", day, rules.Accepted, rules.Accepted, rules.Accepted), 0, 3)
	run(t, ctx, "live row", chromedp.Poll(`document.querySelector("#s-northmoor").textContent.includes("2026-07-03 00:02Z")`, nil))

	run(t, ctx, "day", chromedp.Navigate(url+"/station/northmoor/day/2026-06-30"), chromedp.WaitVisible("#figures svg[data-x0]"))
	picture(t, ctx, "day")
	var box struct{ X, Y, W, H float64 }
	run(t, ctx, "place", chromedp.Evaluate(`(() => { const b = document.querySelector("#figures svg[data-x0]").getBoundingClientRect(); return {X: b.left, Y: b.top, W: b.width, H: b.height}; })()`, &box))
	at := func(share float64) (float64, float64) { return box.X + share*box.W, box.Y + box.H/2 }
	x, y := at(0.5)
	run(t, ctx, "hover", chromedp.MouseEvent(input.MouseMoved, x, y), chromedp.WaitVisible("#readout"), chromedp.Text("#readout", &text))
	if !strings.Contains(text, "2026-06-30") || !strings.Contains(text, "global") || !strings.Contains(text, "W/m2") {
		t.Errorf("read-out %q", text)
	}
	x2, _ := at(0.6)
	var where string
	run(t, ctx, "zoom", chromedp.MouseEvent(input.MousePressed, x, y, chromedp.ButtonType(input.Left)), chromedp.MouseEvent(input.MouseMoved, x2, y, chromedp.ButtonType(input.Left)),
		chromedp.MouseEvent(input.MouseReleased, x2, y, chromedp.ButtonType(input.Left)), chromedp.WaitVisible(`//a[text()="whole day"]`, chromedp.BySearch), chromedp.Location(&where))
	if !strings.Contains(where, "from=") || !strings.Contains(where, "&to=") {
		t.Errorf("zoomed to %s", where)
	}
	run(t, ctx, "keyboard", chromedp.Navigate(url+"/station/northmoor/day/2026-06-30"), chromedp.WaitVisible("#figures"), chromedp.KeyEvent(kb.ArrowRight), chromedp.WaitVisible("#readout"))
}

// A technician signs in, writes a note with its checklist, and says of an episode that it is seen.
func TestBrowserSignsInAndWrites(t *testing.T) {
	c, box, url := served(t)
	ctx := browser(t, 1000, 900)
	episodes, err := c.archive.faults("northmoor")
	if err != nil || len(episodes) == 0 {
		t.Fatal("the kept archive has no episode", err)
	}
	var text string
	run(t, ctx, "wrong password", chromedp.Navigate(url+"/sign-in?back=/station/northmoor/day/2026-06-30"), chromedp.SendKeys(`[name=name]`, "anna"), chromedp.SendKeys(`[name=password]`, "not this one"),
		chromedp.Submit(`.form`), chromedp.WaitVisible("h1"), chromedp.Poll(`document.body.textContent.includes("do not belong together")`, nil))
	run(t, ctx, "sign in", chromedp.Navigate(url+"/sign-in?back=/station/northmoor/day/2026-06-30"), chromedp.SendKeys(`[name=name]`, "anna"), chromedp.SendKeys(`[name=password]`, "a long enough word"),
		chromedp.Submit(`.form`), chromedp.WaitVisible("details.note summary"))
	run(t, ctx, "note", chromedp.Click("details.note summary"), chromedp.WaitVisible("details.note [name=text]"), chromedp.SetValue("details.note [name=instrument]", "G1"),
		chromedp.SetValue("details.note [name=domes_cleaned]", "yes"), chromedp.SendKeys("details.note [name=text]", "dust & <water>"))
	picture(t, ctx, "note")
	run(t, ctx, "keep", chromedp.Click("details.note button"), chromedp.WaitVisible("[role=status]"), chromedp.Text("[role=status]", &text))
	n, ok := box.last()
	if !ok || n.By != "anna" || n.Instrument != "G1" || n.Kind != rules.Cleaning || n.Checklist.DomesCleaned != "yes" || n.Text != "dust & <water>" || !strings.Contains(text, n.ID) {
		t.Errorf("note %+v, page says %q", n, text)
	}
	run(t, ctx, "fault", chromedp.Navigate(url+faultLink(&episodes[0])), chromedp.WaitVisible(`button[value=seen]`))
	picture(t, ctx, "fault")
	run(t, ctx, "seen", chromedp.SendKeys("[name=text]", "on my way"), chromedp.Click(`button[value=seen]`), chromedp.WaitVisible(`button[value=seen]`))
	if n, _ = box.last(); n.Kind != rules.Remark || n.Text != "seen, episode "+episodes[0].ID+": on my way" {
		t.Errorf("remark %+v", n)
	}
	run(t, ctx, "sign out", chromedp.Click("header form button"), chromedp.WaitVisible(`header a[href^="/sign-in"]`))
}

// On a phone nothing is wider than the screen, and without script the pages still say what they should.
func TestBrowserOnAPhoneAndWithoutScript(t *testing.T) {
	_, _, url := served(t)
	ctx := browser(t, 375, 720)
	run(t, ctx, "phone", chromedp.EmulateViewport(375, 720))
	for _, path := range []string{"/", "/station/northmoor/day/2026-06-30", "/station/northmoor/year/2026", "/station/northmoor/residual?from=2026-06-29&to=2026-07-02"} {
		var over int
		run(t, ctx, path, chromedp.Navigate(url+path), chromedp.WaitVisible("main"), chromedp.Evaluate(`document.documentElement.scrollWidth - window.innerWidth`, &over))
		if over > 0 {
			t.Errorf("%s is %d px wider than a phone", path, over)
		}
	}
	picture(t, ctx, "phone")
	var rows int
	run(t, ctx, "script off", emulation.SetScriptExecutionDisabled(true), chromedp.Navigate(url+"/station/northmoor/day/2026-06-30"), chromedp.WaitVisible("#figures svg"))
	run(t, ctx, "count", emulation.SetScriptExecutionDisabled(false), chromedp.Evaluate(`document.querySelectorAll("#figures svg path").length`, &rows))
	if rows < 10 {
		t.Errorf("without script the day has %d paths", rows)
	}
}

// Labels, roles and contrast, by day and by night.
func TestBrowserAccessibility(t *testing.T) {
	if *checker == "" {
		t.Skip("no -axe given: labels and contrast were not checked; npm install axe-core, then -axe node_modules/axe-core/axe.min.js")
	}
	script, err := os.ReadFile(*checker)
	if err != nil {
		t.Fatal(err)
	}
	c, _, url := served(t)
	episodes, err := c.archive.faults("northmoor")
	if err != nil {
		t.Fatal(err)
	}
	ctx := browser(t, 1200, 900)
	run(t, ctx, "start", chromedp.Navigate("about:blank"))
	for _, scheme := range []string{"light", "dark"} {
		paths := []string{"/", "/station/northmoor/day/2026-06-30", faultLink(&episodes[0]), "/station/northmoor/year/2026", "/station/northmoor/residual?from=2026-06-29&to=2026-07-02",
			"/station/northmoor/report/2026-06", "/sign-in", "/nowhere"}
		if scheme == "dark" { // colours are all that is different
			paths = paths[:3]
		}
		for _, path := range paths {
			found, err := violations(ctx, url+path, scheme, string(script))
			if errors.Is(err, context.DeadlineExceeded) { // a tab that hangs is the browser's; the page is looked at again in another
				found, err = violations(ctx, url+path, scheme, string(script))
			}
			if err != nil {
				t.Errorf("%s, %s: %v", scheme, path, err)
			}
			for _, v := range found {
				t.Errorf("%s, %s: %s", scheme, path, v)
			}
		}
	}
}

// violations opens a page in a tab of its own and asks the checker.
func violations(ctx context.Context, url, scheme, script string) (list []string, err error) {
	tab, cancel := chromedp.NewContext(ctx)
	defer cancel()
	tab, cancel = context.WithTimeout(tab, 90*time.Second)
	defer cancel()
	var found string
	err = chromedp.Run(tab, emulation.SetEmulatedMedia().WithFeatures([]*emulation.MediaFeature{{Name: "prefers-color-scheme", Value: scheme}}), chromedp.Navigate(url), chromedp.WaitReady("main"),
		chromedp.Evaluate(script+";0", nil),
		chromedp.Evaluate(`axe.run(document, {runOnly: ["wcag2a", "wcag2aa"], preload: false}).then(r => JSON.stringify(r.violations.map(v => v.id + ": " + v.nodes[0].html.slice(0, 150) + " " + (v.nodes[0].failureSummary || ""))))`, &found, awaited))
	if err != nil {
		return nil, err
	}
	return list, json.Unmarshal([]byte(found), &list)
}
