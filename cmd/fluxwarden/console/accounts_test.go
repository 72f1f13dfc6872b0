package console

import (
	"context"
	"net/http"
	"net/http/httptest"
	"net/url"
	"os"
	"path/filepath"
	"regexp"
	"strings"
	"testing"
	"time"

	"fluxwarden/rules"
)

// A desk is a console that people may sign in to, with a clock to turn and a box for its notes.
type desk struct {
	t    *testing.T
	c    *Console
	h    http.Handler
	now  time.Time
	kept []rules.Note
}

func newDesk(t *testing.T) *desk {
	t.Helper()
	d := &desk{t: t, c: keptConsole(t), now: laterThatDay}
	d.c.config.Now = func() time.Time { return d.now }
	d.c.config.Note = func(_ context.Context, n *rules.Note) error { d.kept = append(d.kept, *n); return nil }
	d.c.config.People = filepath.Join(t.TempDir(), "people.yaml")
	p := &People{}
	if err := p.Set("anna", "a long enough word"); err != nil {
		t.Fatal(err)
	}
	if err := p.Write(d.c.config.People); err != nil {
		t.Fatal(err)
	}
	d.h = d.c.Handler()
	return d
}

func (d *desk) post(path, cookie string, form url.Values, head ...string) *httptest.ResponseRecorder {
	r := httptest.NewRequest("POST", path, strings.NewReader(form.Encode()))
	r.Header.Set("Content-Type", "application/x-www-form-urlencoded")
	for i := 0; i+1 < len(head); i += 2 {
		r.Header.Set(head[i], head[i+1])
	}
	if cookie != "" {
		r.AddCookie(&http.Cookie{Name: sessionCookie, Value: cookie})
	}
	w := httptest.NewRecorder()
	d.h.ServeHTTP(w, r)
	return w
}

func (d *desk) signIn(password string) (w *httptest.ResponseRecorder, cookie string) {
	w = d.post("/sign-in", "", url.Values{"name": {"anna"}, "password": {password}, "back": {"/station/northmoor/day/2026-06-30"}})
	for _, c := range w.Result().Cookies() {
		if c.Name == sessionCookie {
			if !c.HttpOnly || c.SameSite != http.SameSiteStrictMode {
				d.t.Error("the cookie is open to scripts or to other sites")
			}
			cookie = c.Value
		}
	}
	return w, cookie
}

// secretOf reads the form secret from a page.
func (d *desk) secretOf(cookie string) string {
	r := httptest.NewRequest("GET", "/station/northmoor/day/2026-06-30", nil)
	r.AddCookie(&http.Cookie{Name: sessionCookie, Value: cookie})
	w := httptest.NewRecorder()
	d.h.ServeHTTP(w, r)
	m := regexp.MustCompile(`name="form" value="([^"]+)"`).FindStringSubmatch(w.Body.String())
	if m == nil {
		d.t.Fatalf("no form for who is signed in: %d", w.Code)
	}
	return m[1]
}

func aNote(form string) url.Values {
	return url.Values{"form": {form}, "kind": {"cleaning"}, "instrument": {"G1"}, "from": {"2026-06-30T09:00"}, "to": {"2026-06-30T09:10"}, "domes_cleaned": {"yes"}}
}

func TestOnlyWhoIsSignedInWrites(t *testing.T) {
	d := newDesk(t)
	const path = "/station/northmoor/note"
	if w := d.post(path, "", aNote("")); w.Code != http.StatusUnauthorized {
		t.Errorf("without a sign-in: %d", w.Code)
	}
	w, cookie := d.signIn("a long enough word")
	if w.Code != http.StatusSeeOther || w.Header().Get("Location") != "/station/northmoor/day/2026-06-30" || cookie == "" {
		t.Fatalf("sign in: %d %q", w.Code, w.Header().Get("Location"))
	}
	form := d.secretOf(cookie)
	if w := d.post(path, cookie, aNote("guessed")); w.Code != http.StatusForbidden {
		t.Errorf("with a form from elsewhere: %d", w.Code)
	}
	if w := d.post(path, cookie, aNote(form), "Sec-Fetch-Site", "cross-site"); w.Code != http.StatusForbidden {
		t.Errorf("sent by another site: %d", w.Code)
	}
	if len(d.kept) != 0 {
		t.Fatalf("notes were kept that nobody may write: %v", d.kept)
	}
	if w := d.post(path, cookie, aNote(form)); w.Code != http.StatusSeeOther || len(d.kept) != 1 || d.kept[0].By != "anna" || d.kept[0].ID == "" {
		t.Fatalf("a note: %d %v %s", w.Code, d.kept, w.Body)
	}
	d.now = d.now.Add(sessionLasts + time.Minute)
	if w := d.post(path, cookie, aNote(form)); w.Code != http.StatusUnauthorized || !strings.Contains(w.Body.String(), "no longer") {
		t.Errorf("after the session's end: %d", w.Code)
	}
	_, cookie = d.signIn("a long enough word")
	form = d.secretOf(cookie)
	if w := d.post("/sign-out", cookie, url.Values{"form": {form}}); w.Code != http.StatusSeeOther {
		t.Errorf("sign out: %d", w.Code)
	}
	if w := d.post(path, cookie, aNote(form)); w.Code != http.StatusUnauthorized {
		t.Errorf("after signing out: %d", w.Code)
	}
}

func TestBadNotesAreSaid(t *testing.T) {
	d := newDesk(t)
	_, cookie := d.signIn("a long enough word")
	form := d.secretOf(cookie)
	for _, x := range []struct {
		key, value, word string
	}{{"to", "2026-06-30T08:00", "to"}, {"from", "yesterday", "2026-06-21T09:00"}, {"kind", "sorrow", "not a kind"}, {"kind", "withdrawal", "not a kind"}, {"kind", "override", "verdict"},
		{"instrument", "G9", "G9"}, {"domes_cleaned", "maybe", "maybe"}} {
		v := aNote(form)
		v.Set(x.key, x.value)
		if w := d.post("/station/northmoor/note", cookie, v); w.Code != http.StatusBadRequest || !strings.Contains(w.Body.String(), x.word) {
			t.Errorf("%s=%s: %d %s", x.key, x.value, w.Code, w.Body)
		}
	}
	big := aNote(form)
	big.Set("text", strings.Repeat("x", formMax))
	if w := d.post("/station/northmoor/note", cookie, big); w.Code != http.StatusBadRequest {
		t.Errorf("a form of %d bytes: %d", formMax, w.Code)
	}
	if len(d.kept) != 0 {
		t.Errorf("kept %v", d.kept)
	}
}

func TestGuessingIsLimited(t *testing.T) {
	d := newDesk(t)
	for range triesMax {
		if w, _ := d.signIn("not this one"); w.Code != http.StatusForbidden {
			t.Fatalf("a wrong password: %d", w.Code)
		}
	}
	if w, cookie := d.signIn("a long enough word"); w.Code != http.StatusTooManyRequests || cookie != "" {
		t.Errorf("the right one after %d wrong ones: %d", triesMax, w.Code)
	}
	d.now = d.now.Add(triesLast + time.Minute)
	if w, _ := d.signIn("a long enough word"); w.Code != http.StatusSeeOther {
		t.Errorf("after the wait: %d", w.Code)
	}
}

func TestSigningInLeadsNowhereElse(t *testing.T) {
	d := newDesk(t)
	for _, to := range []string{"//evil.example/", `/\evil.example`, "https://evil.example/", "", "javascript:alert(1)"} {
		w := d.post("/sign-in", "", url.Values{"name": {"anna"}, "password": {"a long enough word"}, "back": {to}})
		if w.Header().Get("Location") != "/" {
			t.Errorf("back to %q leads to %q", to, w.Header().Get("Location"))
		}
	}
}

func TestPeopleFile(t *testing.T) {
	path := filepath.Join(t.TempDir(), "people.yaml")
	p, err := ReadPeople(path)
	if err != nil || len(p.People) != 0 {
		t.Fatal("a file that is not there", p, err)
	}
	for _, x := range [][2]string{{"Anna", "a long enough word"}, {"anna", "short"}, {"", "a long enough word"}, {"anna", strings.Repeat("x", 80)}} {
		if p.Set(x[0], x[1]) == nil {
			t.Errorf("taken: %q", x)
		}
	}
	if err := p.Set("anna", "a long enough word"); err != nil {
		t.Fatal(err)
	}
	if err := p.Write(path); err != nil {
		t.Fatal(err)
	}
	text, err := os.ReadFile(path)
	if err != nil || strings.Contains(string(text), "long enough") {
		t.Error("the file holds the password", err)
	}
	if q, err := ReadPeople(path); err != nil || len(q.People) != 1 || !q.Remove("anna") || q.Remove("anna") {
		t.Error("read again", q, err)
	}
	if err := os.WriteFile(path, []byte("people: [{name: anna, bcrypt: plain}]"), 0o600); err != nil {
		t.Fatal(err)
	}
	if _, err := ReadPeople(path); err == nil || !strings.Contains(err.Error(), "fluxwarden people add") {
		t.Error("a hash that is none:", err)
	}
}
