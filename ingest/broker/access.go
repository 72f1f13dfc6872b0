package broker

import (
	"crypto/sha256"
	"crypto/subtle"
	"encoding/base64"
	"fmt"
	"log/slog"
	"maps"
	"net"
	"os"
	"slices"
	"strings"
	"sync"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nkeys"
	"golang.org/x/crypto/bcrypt"
)

// AnswerPrefix and a station's name begin the subjects on which that station may hear answers: a client's inboxes lie there.
const AnswerPrefix = "answer."

// AccessSettings say who may speak.
type AccessSettings struct {
	Book      string                   // file of credentials; empty: there are none
	Anonymous bool                     // from loopback, everything is allowed without a credential
	Refused   func(way, reason string) // counts those turned away; optional
	Log       *slog.Logger             // optional
}

// Access decides who may speak, whatever way they come in, and follows its book without a restart.
type Access struct {
	s      AccessSettings
	house  string // the secret of this process's own connections
	mu     sync.Mutex
	stamp  fileStamp
	byName map[string]*Credential
	byKey  map[string]*Credential
	proved map[[32]byte]string        // hash of name and secret that were proved right, to the name: bcrypt is slow by intent
	edges  *server.Account            // that edges join; nil: none may
	leaves map[uint64]string          // connections of edges, to their names
	cut    func(gone map[string]bool) // ends the server's connections of these names and nkeys
}

type fileStamp struct {
	modified time.Time
	size     int64
}

// provedMax bounds what is remembered; beyond it all is forgotten and proved anew.
const provedMax = 10_000

// Reasons for which somebody is turned away.
const (
	RefusedNoCredential = "no_credential"
	RefusedWrong        = "wrong_credential"
	RefusedRevoked      = "revoked"
	RefusedSubject      = "subject"     // another station's, or one that no station may use
	RefusedSilent       = "silent"      // connected and did not say who it is
	RefusedTLS          = "tls"         // no or wrong TLS, or a certificate that does not hold
	RefusedTooLarge     = "too_large"   // more than a message may have
	RefusedProtocol     = "protocol"    // not what the way speaks
	RefusedConnections  = "connections" // too many at once
)

// RefusedReasons lists them all.
var RefusedReasons = []string{RefusedNoCredential, RefusedWrong, RefusedRevoked, RefusedSubject, RefusedSilent, RefusedTLS, RefusedTooLarge,
	RefusedProtocol, RefusedConnections}

// OpenAccess reads the book.
func OpenAccess(s AccessSettings) (*Access, error) {
	a := &Access{s: s, house: randomSecret(), proved: map[[32]byte]string{}}
	if s.Book == "" {
		return a, nil
	}
	_, err := a.Reload()
	return a, err
}

// Reload reads the book again where its file has changed, and cuts the connections of those who may no longer speak. A book that
// cannot be read changes nothing: those in force stay.
func (a *Access) Reload() (changed bool, err error) {
	if a.s.Book == "" {
		return false, nil
	}
	info, err := os.Stat(a.s.Book)
	if err != nil {
		return false, fmt.Errorf("credentials: %w; fluxwarden credentials new makes the file", err)
	}
	stamp := fileStamp{info.ModTime(), info.Size()}
	a.mu.Lock()
	same := a.byName != nil && stamp == a.stamp
	a.mu.Unlock()
	if same {
		return false, nil
	}
	book, err := ReadBook(a.s.Book)
	if err != nil {
		return false, err
	}
	byName, byKey := map[string]*Credential{}, map[string]*Credential{}
	for i := range book.Credentials {
		c := &book.Credentials[i]
		byName[c.Name] = c
		if c.NKey != "" {
			byKey[c.NKey] = c
		}
	}
	a.mu.Lock()
	gone := map[string]bool{}
	for name, was := range a.byName {
		if is := byName[name]; is == nil || *is != *was {
			gone[name] = true
			if was.NKey != "" {
				gone[was.NKey] = true
			}
		}
	}
	a.byName, a.byKey, a.stamp = byName, byKey, stamp
	clear(a.proved)
	cut := a.cut
	a.mu.Unlock()
	if cut != nil && len(gone) > 0 {
		cut(gone)
	}
	return true, nil
}

// Stations are those that have a credential which holds.
func (a *Access) Stations() []string {
	a.mu.Lock()
	defer a.mu.Unlock()
	set := map[string]bool{}
	for _, c := range a.byName {
		if c.Role == RoleStation && c.Revoked.IsZero() {
			set[c.Station] = true
		}
	}
	return slices.Sorted(maps.Keys(set))
}

// MaySpeak says whether the holder of a name and secret may bring readings of a station, by a way other than NATS. An empty name is one who
// shows no credential; remote is where it comes from. The reason is one of RefusedReasons, empty where it may.
func (a *Access) MaySpeak(name, secret, station string, remote net.Addr) (reason string) {
	if name == "" && secret == "" {
		if a.s.Anonymous && loopback(remote) {
			return ""
		}
		return RefusedNoCredential
	}
	c, reason := a.prove(name, secret)
	if c == nil {
		return reason
	}
	if station != "" && c.Role != RoleOperator && (c.Role != RoleStation || c.Station != station) {
		return RefusedSubject
	}
	return ""
}

// Holds says whether a credential that was proved once still holds: for connections that stay.
func (a *Access) Holds(name string) bool {
	a.mu.Lock()
	defer a.mu.Unlock()
	if name == "" {
		return true
	}
	c := a.byName[name]
	return c != nil && c.Revoked.IsZero()
}

// Refused counts one that was turned away.
func (a *Access) Refused(way, reason string) {
	if a.s.Refused != nil {
		a.s.Refused(way, reason)
	}
}

// nobody is a hash that no secret is known of: an unknown name costs as much time as a known one.
var nobody, _ = bcrypt.GenerateFromPassword([]byte(randomSecret()), bcryptCost)

// prove finds the credential of a name with its password.
func (a *Access) prove(name, secret string) (*Credential, string) {
	key := sha256.Sum256([]byte(name + "\x00" + secret))
	a.mu.Lock()
	c, known := a.byName[name], a.proved[key] == name
	a.mu.Unlock()
	if c == nil || c.Bcrypt == "" {
		_ = bcrypt.CompareHashAndPassword(nobody, []byte(secret))
		return nil, RefusedWrong
	}
	if !known && bcrypt.CompareHashAndPassword([]byte(c.Bcrypt), []byte(secret)) != nil {
		return nil, RefusedWrong
	}
	if !c.Revoked.IsZero() {
		return nil, RefusedRevoked
	}
	if !known {
		a.mu.Lock()
		if len(a.proved) >= provedMax {
			clear(a.proved)
		}
		if a.byName[name] == c { // the book may have changed meanwhile
			a.proved[key] = name
		}
		a.mu.Unlock()
	}
	return c, ""
}

// Check implements server.Authentication.
func (a *Access) Check(client server.ClientAuthentication) bool {
	if client.Kind() == server.LEAF {
		return a.checkLeaf(client)
	}
	o := client.GetOpts()
	if o.Username == houseEdgesName && subtle.ConstantTimeCompare([]byte(o.Password), []byte(a.house)) == 1 {
		a.mu.Lock()
		account := a.edges
		a.mu.Unlock()
		if account == nil {
			return false
		}
		client.RegisterUser(&server.User{Username: houseEdgesName, Account: account})
		return true
	}
	if o.Username == houseName && subtle.ConstantTimeCompare([]byte(o.Password), []byte(a.house)) == 1 {
		return true
	}
	if o.Username == "" && o.Password == "" && o.Nkey == "" && o.JWT == "" && o.Token == "" {
		if a.s.Anonymous && loopback(client.RemoteAddress()) {
			return true
		}
		a.Refused("nats", RefusedNoCredential)
		return false
	}
	c, reason := a.who(o, client.GetNonce())
	if c == nil {
		a.Refused("nats", reason)
		return false
	}
	if c.Role == RoleEdge { // it comes by the leaf nodes' port
		a.Refused("nats", RefusedSubject)
		return false
	}
	user := &server.User{Username: c.Name}
	if c.Role == RoleStation {
		user.Permissions = stationPermissions(c.Station)
	}
	client.RegisterUser(user)
	a.mu.Lock()
	defer a.mu.Unlock()
	return a.byName[c.Name] == c // the book may have changed while it was being proved
}

func (a *Access) who(o *server.ClientOpts, nonce []byte) (*Credential, string) {
	if o.Nkey == "" {
		return a.prove(o.Username, o.Password)
	}
	a.mu.Lock()
	c := a.byKey[o.Nkey]
	a.mu.Unlock()
	if c == nil || len(nonce) == 0 {
		return nil, RefusedWrong
	}
	sig, err := base64.RawURLEncoding.DecodeString(o.Sig)
	if err != nil {
		if sig, err = base64.StdEncoding.DecodeString(o.Sig); err != nil {
			return nil, RefusedWrong
		}
	}
	pub, err := nkeys.FromPublicKey(o.Nkey)
	if err != nil || pub.Verify(nonce, sig) != nil {
		return nil, RefusedWrong
	}
	if !c.Revoked.IsZero() {
		return nil, RefusedRevoked
	}
	return c, ""
}

// stationPermissions let a station publish its own readings and hear the answers to them.
func stationPermissions(station string) *server.Permissions {
	return &server.Permissions{
		Publish:   &server.SubjectPermission{Allow: []string{readingsPrefix + station}},
		Subscribe: &server.SubjectPermission{Allow: []string{AnswerPrefix + station + ".>"}},
	}
}

const (
	readingsPrefix = "rad.v1."
	houseName      = "this-process"
)

func loopback(address net.Addr) bool {
	if address == nil {
		return false
	}
	host, _, err := net.SplitHostPort(address.String())
	if err != nil {
		return false
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}

// LoopbackOnly says whether an address to listen on is reached from this machine only.
func LoopbackOnly(address string) bool {
	host, _, err := net.SplitHostPort(address)
	if err != nil {
		return false
	}
	if host == "localhost" {
		return true
	}
	ip := net.ParseIP(host)
	return ip != nil && ip.IsLoopback()
}

// violation gives the reason behind what the server logs about a client, empty for anything else.
func violation(text string) string {
	for _, v := range []struct{ piece, reason string }{
		{"Publish Violation", RefusedSubject}, {"Subscription Violation", RefusedSubject}, {"TLS handshake error", RefusedTLS},
		{"Authentication Timeout", RefusedSilent}, {"maximum payload", RefusedTooLarge}, {"maximum connections", RefusedConnections},
		{"parser ERROR", RefusedProtocol},
	} {
		if strings.Contains(text, v.piece) {
			return v.reason
		}
	}
	return ""
}
