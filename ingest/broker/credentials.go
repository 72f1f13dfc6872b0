package broker

import (
	"bytes"
	"crypto/rand"
	"encoding/base32"
	"errors"
	"fmt"
	"io/fs"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strings"
	"time"

	"github.com/nats-io/nkeys"
	"golang.org/x/crypto/bcrypt"
	"gopkg.in/yaml.v3"
)

// A Role says what the holder of a credential may do.
type Role string

// The roles.
const (
	RoleStation  Role = "station"  // publish the readings of one station, hear the answers, nothing else
	RoleOperator Role = "operator" // everything: for those who run the daemon
	RoleEdge     Role = "edge"     // join as an edge, by a leaf node
)

// A Credential is one line of the book: who may speak, and how it is recognised. It holds no secret: a password is kept as its
// bcrypt hash, of an nkey only the public half.
type Credential struct {
	Name    string    `yaml:"name"`
	Role    Role      `yaml:"role"`
	Station string    `yaml:"station,omitempty"` // of a station's credential
	Bcrypt  string    `yaml:"bcrypt,omitempty"`
	NKey    string    `yaml:"nkey,omitempty"`
	Created time.Time `yaml:"created"`
	Revoked time.Time `yaml:"revoked,omitempty"` // zero: it holds
}

// A Book is a file of credentials.
type Book struct{ Credentials []Credential }

// bcryptCost is low: the secrets are random and 160 bits long, so that no dictionary helps, and a station may come back often.
const (
	bcryptCost  = 8
	secretBytes = 20
	bookHead    = "# Who may speak to fluxwarden. Changed by `fluxwarden credentials`; no secret is in it.\n"
)

var (
	nameForm    = regexp.MustCompile(`^[a-z0-9][a-z0-9_-]{0,63}$`)
	stationForm = regexp.MustCompile(`^[a-z0-9_-]{1,40}$`) // as in site files
)

// ReadBook reads a book. A file that is not there is an error of the kind fs.ErrNotExist.
func ReadBook(path string) (*Book, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("credentials: %w", err)
	}
	b, err := ParseBook(text)
	if err != nil {
		return nil, fmt.Errorf("credentials: %s: %w", path, err)
	}
	return b, nil
}

// ParseBook reads the text of a book. It is strict.
func ParseBook(text []byte) (*Book, error) {
	b := &Book{}
	dec := yaml.NewDecoder(bytes.NewReader(text))
	dec.KnownFields(true)
	if err := dec.Decode(&b.Credentials); err != nil && len(bytes.TrimSpace(text)) > 0 && !strings.Contains(err.Error(), "EOF") {
		return nil, errors.New(strings.ReplaceAll(strings.TrimPrefix(err.Error(), "yaml: "), "\n", " "))
	}
	seen := map[string]bool{}
	for i := range b.Credentials {
		c := &b.Credentials[i]
		if err := c.check(); err != nil {
			return nil, fmt.Errorf("entry %d: %q: %w", i+1, c.Name, err)
		}
		if seen[c.Name] {
			return nil, fmt.Errorf("entry %d: %q: the name is used twice; give each its own", i+1, c.Name)
		}
		seen[c.Name] = true
	}
	return b, nil
}

func (c *Credential) check() error {
	switch {
	case !nameForm.MatchString(c.Name):
		return errors.New("a name is 1 to 64 of a-z 0-9 _ -, and begins with a letter or digit")
	case c.Role != RoleStation && c.Role != RoleOperator && c.Role != RoleEdge:
		return fmt.Errorf("role %q: there are station, operator and edge", c.Role)
	case (c.Role == RoleStation) != (c.Station != ""):
		return errors.New("a station's credential names its station, and no other does")
	case c.Station != "" && !stationForm.MatchString(c.Station):
		return fmt.Errorf("station %q: not the name of a station", c.Station)
	case (c.Bcrypt == "") == (c.NKey == ""):
		return errors.New("give either bcrypt or nkey")
	case c.NKey != "" && !nkeys.IsValidPublicUserKey(c.NKey):
		return errors.New("nkey: not the public key of a user; it begins with U")
	case c.Role == RoleEdge && c.NKey != "":
		return errors.New("an edge joins with a password, not with an nkey")
	}
	if c.Bcrypt != "" {
		if _, err := bcrypt.Cost([]byte(c.Bcrypt)); err != nil {
			return errors.New("bcrypt: not a bcrypt hash; make one with fluxwarden credentials new")
		}
	}
	return nil
}

// A Secret is what the holder of a credential is given, once.
type Secret struct {
	Name     string `yaml:"name"`
	Station  string `yaml:"station,omitempty"`
	Password string `yaml:"password,omitempty"`
	Seed     string `yaml:"seed,omitempty"` // of an nkey
}

// New makes a credential and adds it to the book; the caller writes the book. An empty name is made from the station or role.
func (b *Book) New(c Credential, nkey bool, now time.Time) (Secret, error) {
	if c.Name == "" {
		base := c.Station
		if base == "" {
			base = string(c.Role)
		}
		for n := 1; c.Name == "" || b.find(c.Name) != nil; n++ {
			c.Name = fmt.Sprintf("%s-%d", base, n)
		}
	}
	if b.find(c.Name) != nil {
		return Secret{}, fmt.Errorf("credentials: %s is there already; names of revoked ones are not used again", c.Name)
	}
	secret := Secret{Name: c.Name, Station: c.Station}
	if nkey {
		pair, err := nkeys.CreateUser()
		if err != nil {
			return Secret{}, fmt.Errorf("credentials: nkey: %w", err)
		}
		seed, err := pair.Seed()
		if err != nil {
			return Secret{}, fmt.Errorf("credentials: nkey: %w", err)
		}
		if c.NKey, err = pair.PublicKey(); err != nil {
			return Secret{}, fmt.Errorf("credentials: nkey: %w", err)
		}
		secret.Seed = string(seed)
	} else {
		secret.Password = randomSecret()
		hash, err := bcrypt.GenerateFromPassword([]byte(secret.Password), bcryptCost)
		if err != nil {
			return Secret{}, fmt.Errorf("credentials: bcrypt: %w", err)
		}
		c.Bcrypt = string(hash)
	}
	c.Created = now.UTC().Truncate(time.Second)
	if err := c.check(); err != nil {
		return Secret{}, fmt.Errorf("credentials: %s: %w", c.Name, err)
	}
	b.Credentials = append(b.Credentials, c)
	return secret, nil
}

func randomSecret() string {
	raw := make([]byte, secretBytes)
	_, _ = rand.Read(raw) // it never fails
	return strings.ToLower(base32.StdEncoding.WithPadding(base32.NoPadding).EncodeToString(raw))
}

// Revoke ends a credential; the caller writes the book. The line stays, so that the name is not given again.
func (b *Book) Revoke(name string, now time.Time) error {
	c := b.find(name)
	switch {
	case c == nil:
		return fmt.Errorf("credentials: there is no %q; fluxwarden credentials list names them", name)
	case !c.Revoked.IsZero():
		return fmt.Errorf("credentials: %s was revoked already, on %s", name, c.Revoked.Format(time.RFC3339))
	}
	c.Revoked = now.UTC().Truncate(time.Second)
	return nil
}

func (b *Book) find(name string) *Credential {
	if i := slices.IndexFunc(b.Credentials, func(c Credential) bool { return c.Name == name }); i >= 0 {
		return &b.Credentials[i]
	}
	return nil
}

// Write replaces the file whole, readable by its owner only.
func (b *Book) Write(path string) error {
	text, err := yaml.Marshal(b.Credentials)
	if err != nil {
		return fmt.Errorf("credentials: %w", err)
	}
	mode := fs.FileMode(0o600)
	if info, err := os.Stat(path); err == nil {
		mode = info.Mode().Perm() // a group that may read it goes on to be able to
	}
	if err := replaceFile(path, append([]byte(bookHead), text...), mode); err != nil {
		return fmt.Errorf("credentials: %w", err)
	}
	return nil
}

func replaceFile(path string, text []byte, mode fs.FileMode) error {
	f, err := os.CreateTemp(filepath.Dir(path), "."+filepath.Base(path)+".*.tmp")
	if err != nil {
		return err
	}
	defer os.Remove(f.Name()) // in vain once it is renamed
	err = f.Chmod(mode)
	if err == nil {
		_, err = f.Write(text)
	}
	if err == nil {
		err = f.Sync()
	}
	if e := f.Close(); err == nil {
		err = e
	}
	if err == nil {
		err = os.Rename(f.Name(), path)
	}
	return err
}

// WriteSecret writes what the holder is given to a file that only its owner can read. It overwrites nothing.
func (s Secret) WriteSecret(path string) error {
	text, err := yaml.Marshal(s)
	if err != nil {
		return fmt.Errorf("credentials: %w", err)
	}
	f, err := os.OpenFile(path, os.O_WRONLY|os.O_CREATE|os.O_EXCL, 0o600)
	if err != nil {
		return fmt.Errorf("credentials: %w", err)
	}
	_, err = f.Write(text)
	if e := f.Close(); err == nil {
		err = e
	}
	if err != nil {
		return fmt.Errorf("credentials: %s: %w", path, err)
	}
	return nil
}

// ReadSecret reads a file that WriteSecret made.
func ReadSecret(path string) (Secret, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return Secret{}, fmt.Errorf("credentials: %w", err)
	}
	return parseSecret(path, text)
}

func parseSecret(path string, text []byte) (Secret, error) {
	var s Secret
	dec := yaml.NewDecoder(bytes.NewReader(text))
	dec.KnownFields(true)
	if dec.Decode(&s) != nil || s.Name == "" || (s.Password == "") == (s.Seed == "") { // the cause could repeat the secret
		return Secret{}, fmt.Errorf("credentials: %s: not a file of fluxwarden credentials new --out: it has name and either password or seed", path)
	}
	return s, nil
}
