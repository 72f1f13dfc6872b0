package console

import (
	"crypto/rand"
	"crypto/sha256"
	"crypto/subtle"
	"encoding/base64"
	"errors"
	"fmt"
	"io/fs"
	"net"
	"net/http"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"sync"
	"time"

	"golang.org/x/crypto/bcrypt"
	"gopkg.in/yaml.v3"
)

// People is a file of who may sign in. It holds no password, only bcrypt hashes.
type People struct {
	People []Person `yaml:"people"`
}

// A Person may sign in and write notes.
type Person struct {
	Name   string `yaml:"name"`
	Bcrypt string `yaml:"bcrypt"`
}

var personForm = regexp.MustCompile(`^[a-z0-9][a-z0-9._-]{0,63}$`)

const (
	passwordMin = 10
	passwordMax = 72 // bcrypt takes no more
	peopleHead  = "# Who may sign in to the console. Changed by `fluxwarden people`; no password is in it.\n"
)

// ReadPeople reads the file. One that is not there has nobody in it.
func ReadPeople(path string) (*People, error) {
	text, err := os.ReadFile(path)
	if errors.Is(err, fs.ErrNotExist) {
		return &People{}, nil
	}
	if err != nil {
		return nil, fmt.Errorf("people: %w", err)
	}
	p := &People{}
	if err := yaml.Unmarshal(text, p); err != nil {
		return nil, fmt.Errorf("people %s: %w", path, err)
	}
	for _, x := range p.People {
		if _, err := bcrypt.Cost([]byte(x.Bcrypt)); err != nil || !personForm.MatchString(x.Name) {
			return nil, fmt.Errorf("people %s: %q: not a name with a bcrypt hash; make it with fluxwarden people add", path, x.Name)
		}
	}
	return p, nil
}

// Set adds a person or gives one another password.
func (p *People) Set(name, password string) error {
	if !personForm.MatchString(name) {
		return fmt.Errorf("people: name %q: write small letters, digits, dots, dashes, at most 64", name)
	}
	if len(password) < passwordMin || len(password) > passwordMax {
		return fmt.Errorf("people: the password has %d letters; give one of %d to %d", len(password), passwordMin, passwordMax)
	}
	hash, err := bcrypt.GenerateFromPassword([]byte(password), bcrypt.DefaultCost)
	if err != nil {
		return fmt.Errorf("people: %w", err)
	}
	for i := range p.People {
		if p.People[i].Name == name {
			p.People[i].Bcrypt = string(hash)
			return nil
		}
	}
	p.People = append(p.People, Person{name, string(hash)})
	return nil
}

// Remove takes a person out and says whether there was one.
func (p *People) Remove(name string) bool {
	n := len(p.People)
	p.People = slices.DeleteFunc(p.People, func(x Person) bool { return x.Name == name })
	return len(p.People) < n
}

// Write replaces the file whole.
func (p *People) Write(path string) error {
	text, err := yaml.Marshal(p)
	if err != nil {
		return fmt.Errorf("people: %w", err)
	}
	temp, err := os.CreateTemp(filepath.Dir(path), ".people")
	if err != nil {
		return fmt.Errorf("people: %w", err)
	}
	defer os.Remove(temp.Name())
	_, err = temp.Write(append([]byte(peopleHead), text...))
	if err = errors.Join(err, temp.Sync(), temp.Close()); err != nil {
		return fmt.Errorf("people: %w", err)
	}
	if err := os.Rename(temp.Name(), path); err != nil {
		return fmt.Errorf("people: %w", err)
	}
	return nil
}

// signIns keeps who is signed in, in memory: a restart signs everybody out.
type signIns struct {
	mu       sync.Mutex
	sessions map[[32]byte]session // by the hash of the cookie, so that a copy of the memory lets nobody in
	tries    map[string]tries
}

type session struct {
	name, form string // form is the secret that every form of this session carries
	until      time.Time
}

type tries struct {
	n     int
	until time.Time
}

const (
	sessionCookie = "fluxwarden_session"
	sessionLasts  = 12 * time.Hour
	triesMax      = 5 // wrong passwords of one name or from one address, in triesLast
	triesLast     = 15 * time.Minute
	rememberedMax = 10000 // sessions and tries each; beyond, the oldest are forgotten
)

func secret() string {
	b := make([]byte, 32)
	_, _ = rand.Read(b) // never fails, as crypto/rand says
	return base64.RawURLEncoding.EncodeToString(b)
}

// errTooMany is for who tries too often.
var errTooMany = &problem{http.StatusTooManyRequests, "too many wrong passwords", "Wait a quarter of an hour."}

// nobody is a hash to compare with where there is no such person, so that the time taken does not tell who there is.
var nobody, _ = bcrypt.GenerateFromPassword([]byte(secret()), bcrypt.DefaultCost)

// signIn checks a password and gives a cookie.
func (c *Console) signIn(name, password, address string) (cookie string, err error) {
	now := c.now()
	if c.signed.tooMany(now, "name "+name, "from "+address) {
		return "", errTooMany
	}
	people, err := ReadPeople(c.config.People)
	if err != nil {
		return "", err
	}
	hash, known := nobody, false
	for _, x := range people.People {
		if x.Name == name {
			hash, known = []byte(x.Bcrypt), true
		}
	}
	if bcrypt.CompareHashAndPassword(hash, []byte(password)) != nil || !known {
		c.signed.wrong(now, "name "+name, "from "+address)
		return "", &problem{http.StatusForbidden, "name and password do not belong together", "Try again; who runs the daemon can set a new password with fluxwarden people add."}
	}
	cookie = secret()
	c.signed.mu.Lock()
	defer c.signed.mu.Unlock()
	if len(c.signed.sessions) > rememberedMax || c.signed.sessions == nil {
		c.signed.sessions = map[[32]byte]session{}
	}
	c.signed.sessions[sha256.Sum256([]byte(cookie))] = session{name, secret(), now.Add(sessionLasts)}
	return cookie, nil
}

func (s *signIns) tooMany(now time.Time, keys ...string) bool {
	s.mu.Lock()
	defer s.mu.Unlock()
	return slices.ContainsFunc(keys, func(k string) bool { t := s.tries[k]; return t.n >= triesMax && now.Before(t.until) })
}

func (s *signIns) wrong(now time.Time, keys ...string) {
	s.mu.Lock()
	defer s.mu.Unlock()
	if len(s.tries) > rememberedMax || s.tries == nil {
		s.tries = map[string]tries{}
	}
	for _, k := range keys {
		t := s.tries[k]
		if now.After(t.until) {
			t.n = 0
		}
		s.tries[k] = tries{t.n + 1, now.Add(triesLast)}
	}
}

// signedIn gives the session of a request.
func (c *Console) signedIn(r *http.Request) (session, bool) {
	cookie, err := r.Cookie(sessionCookie)
	if err != nil {
		return session{}, false
	}
	c.signed.mu.Lock()
	defer c.signed.mu.Unlock()
	key := sha256.Sum256([]byte(cookie.Value))
	s, ok := c.signed.sessions[key]
	if ok && c.now().After(s.until) {
		delete(c.signed.sessions, key)
		ok = false
	}
	return s, ok
}

// author says who sends a form, or why it is not taken: not signed in, or a form that is not of this session.
func (c *Console) author(r *http.Request) (string, error) {
	s, ok := c.signedIn(r)
	if !ok {
		return "", &problem{http.StatusUnauthorized, "nobody is signed in here, or no longer", "Sign in and send it again."}
	}
	if subtle.ConstantTimeCompare([]byte(s.form), []byte(r.PostFormValue("form"))) != 1 {
		return "", &problem{http.StatusForbidden, "this form is not of this sign-in", "Open the page anew and send it again."}
	}
	return s.name, nil
}

func (c *Console) setCookie(w http.ResponseWriter, r *http.Request, value string, age int) {
	http.SetCookie(w, &http.Cookie{Name: sessionCookie, Value: value, Path: "/", MaxAge: age, HttpOnly: true, SameSite: http.SameSiteStrictMode, Secure: r.TLS != nil})
}

func (c *Console) signInPage(w http.ResponseWriter, r *http.Request) error {
	if c.config.People == "" {
		return notFound("nobody can sign in here", "Name a file of people in the settings (console: people), and add some with fluxwarden people add.")
	}
	return c.render(w, "signin.html", struct {
		frame
		Back string
	}{c.frame(r, "Sign in", link{Text: "Sign in", Here: true}), back(r)})
}

// back is where to go after signing in: a path here, never an address elsewhere.
func back(r *http.Request) string {
	to := r.FormValue("back")
	if len(to) < 2 || to[0] != '/' || to[1] == '/' || to[1] == '\\' {
		return "/"
	}
	return to
}

func (c *Console) signInPost(w http.ResponseWriter, r *http.Request) error {
	if c.config.People == "" {
		return c.signInPage(w, r)
	}
	address, _, err := net.SplitHostPort(r.RemoteAddr)
	if err != nil {
		address = r.RemoteAddr
	}
	cookie, err := c.signIn(r.PostFormValue("name"), r.PostFormValue("password"), address)
	if err != nil {
		return err
	}
	c.setCookie(w, r, cookie, int(sessionLasts.Seconds()))
	return seeOther(w, back(r))
}

func (c *Console) signOutPost(w http.ResponseWriter, r *http.Request) error {
	if _, err := c.author(r); err != nil {
		return err
	}
	if cookie, err := r.Cookie(sessionCookie); err == nil {
		c.signed.mu.Lock()
		delete(c.signed.sessions, sha256.Sum256([]byte(cookie.Value)))
		c.signed.mu.Unlock()
	}
	c.setCookie(w, r, "", -1)
	return seeOther(w, "/")
}

func seeOther(w http.ResponseWriter, to string) error {
	w.Header().Set("Location", to)
	w.WriteHeader(http.StatusSeeOther)
	return nil
}
