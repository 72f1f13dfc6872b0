package broker

import (
	"bytes"
	"context"
	"crypto/ecdsa"
	"crypto/elliptic"
	"crypto/rand"
	"crypto/tls"
	"crypto/x509"
	"crypto/x509/pkix"
	"encoding/pem"
	"errors"
	"io"
	"log/slog"
	"math/big"
	"net"
	"os"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"github.com/nats-io/nats.go"
)

// A checkpoint is a server with a book of credentials.
type checkpoint struct {
	*testing.T
	book   Book
	file   string
	access *Access
	server *Embedded
	log    *lockedBuffer

	authSeconds float64

	mu      sync.Mutex
	refused map[string]int
}

type lockedBuffer struct {
	mu sync.Mutex
	b  bytes.Buffer
}

func (l *lockedBuffer) Write(p []byte) (int, error) {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.Write(p)
}

func (l *lockedBuffer) String() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.b.String()
}

func (c *checkpoint) must(err error) {
	c.Helper()
	if err != nil {
		c.Fatal(err)
	}
}

func (c *checkpoint) count(reason string) int {
	c.mu.Lock()
	defer c.mu.Unlock()
	return c.refused[reason]
}

func (c *checkpoint) credential(role Role, station string, nkey bool) Secret {
	c.Helper()
	s, err := c.book.New(Credential{Role: role, Station: station}, nkey, time.Now())
	c.must(err)
	return s
}

func newCheckpoint(t *testing.T) *checkpoint {
	return &checkpoint{T: t, file: filepath.Join(t.TempDir(), "credentials.yaml"), refused: map[string]int{}, log: &lockedBuffer{}}
}

func (c *checkpoint) open(anonymous bool, tlsConfig *tls.Config) {
	c.Helper()
	c.must(c.book.Write(c.file))
	var err error
	log := slog.New(slog.NewTextHandler(c.log, nil))
	c.access, err = OpenAccess(AccessSettings{Book: c.file, Anonymous: anonymous, Log: log, Refused: func(_, reason string) {
		c.mu.Lock()
		c.refused[reason]++
		c.mu.Unlock()
	}})
	c.must(err)
	c.server, err = StartEmbedded(c.Context(), EmbeddedSettings{StoreDir: c.TempDir(), StoreBytes: 64 << 20, Listen: true, Access: c.access, TLS: tlsConfig, Log: log, authSeconds: c.authSeconds})
	c.must(err)
	c.Cleanup(c.server.Stop)
}

// connect is a client with a secret, and the errors that the server sends it.
func (c *checkpoint) connect(s Secret, more ...nats.Option) (*nats.Conn, chan error, error) {
	errs := make(chan error, 100)
	options, err := s.options()
	c.must(err)
	options = append(options, nats.NoReconnect(), nats.ErrorHandler(func(_ *nats.Conn, _ *nats.Subscription, err error) { errs <- err }),
		nats.ClosedHandler(func(n *nats.Conn) { errs <- nats.ErrConnectionClosed }))
	conn, err := nats.Connect(c.server.URL(), append(options, more...)...)
	if conn != nil {
		c.Cleanup(conn.Close)
	}
	return conn, errs, err
}

func (c *checkpoint) expect(errs chan error, piece string) {
	c.Helper()
	for {
		select {
		case err := <-errs:
			if strings.Contains(strings.ToLower(err.Error()), piece) {
				return
			}
		case <-time.After(time.Minute):
			c.Fatalf("%q never came", piece)
		}
	}
}

func TestAStationMayPublishItsOwnSubjectAndReadNothing(t *testing.T) {
	c := newCheckpoint(t)
	secrets := map[string]Secret{"password": c.credential(RoleStation, "northmoor", false), "nkey": c.credential(RoleStation, "northmoor", true)}
	c.open(false, nil)
	house, err := Connect(ConnectSettings{Embedded: c.server})
	c.must(err)
	defer house.Close()
	_, err = house.Conn.Subscribe("rad.v1.*", func(m *nats.Msg) { _ = m.Respond([]byte("taken")) })
	c.must(err)
	c.must(house.Conn.Flush())
	for kind, secret := range secrets {
		t.Run(kind, func(t *testing.T) {
			conn, errs, err := c.connect(secret)
			c.must(err)
			if m, err := conn.Request("rad.v1.northmoor", []byte("x"), time.Minute); err != nil || string(m.Data) != "taken" {
				t.Fatalf("its own subject: %v", err)
			}
			before := c.count(RefusedSubject)
			for _, subject := range []string{"rad.v1.southmoor", "journal.07", "$JS.API.STREAM.DELETE.JOURNAL", "answer.southmoor.x"} {
				c.must(conn.Publish(subject, nil))
				c.expect(errs, "permissions violation for publish")
			}
			for _, subject := range []string{">", "rad.v1.northmoor", "findings.>", "answer.>", "_INBOX.>", "$SYS.>"} {
				if _, err := conn.SubscribeSync(subject); err != nil {
					t.Fatal(err)
				}
				c.expect(errs, "permissions violation for subscription")
			}
			if n := c.count(RefusedSubject) - before; n != 10 {
				t.Errorf("%d violations counted, want 10", n)
			}
		})
	}
	if n := strings.Count(c.log.String(), "Violation"); n > 2 {
		t.Errorf("20 violations of two kinds fill %d lines of the log", n)
	}
	for _, s := range secrets {
		if s.Password != "" && strings.Contains(c.log.String(), s.Password) {
			t.Error("a secret is in the log")
		}
	}
}

func TestWhoShowsNoOrAWrongCredentialIsTurnedAway(t *testing.T) {
	c := newCheckpoint(t)
	good := c.credential(RoleStation, "northmoor", false)
	key := c.credential(RoleStation, "northmoor", true)
	edge := c.credential(RoleEdge, "", false)
	c.open(false, nil)
	stranger := Book{}
	other, err := stranger.New(Credential{Name: key.Name, Role: RoleOperator}, true, time.Now())
	c.must(err)
	for _, tc := range []struct {
		what   string
		secret Secret
		reason string
	}{
		{"wrong password", Secret{Name: good.Name, Password: "guess"}, RefusedWrong},
		{"unknown name", Secret{Name: "nobody", Password: good.Password}, RefusedWrong},
		{"a password for an nkey's name", Secret{Name: key.Name, Password: good.Password}, RefusedWrong},
		{"another key", other, RefusedWrong},
		{"an edge at the stations' port", edge, RefusedSubject},
	} {
		before := c.count(tc.reason)
		if _, _, err := c.connect(tc.secret); !errors.Is(err, nats.ErrAuthorization) {
			t.Errorf("%s: %v", tc.what, err)
		}
		if c.count(tc.reason) == before {
			t.Errorf("%s: not counted as %s", tc.what, tc.reason)
		}
	}
	if _, err := nats.Connect(c.server.URL(), nats.NoReconnect()); !errors.Is(err, nats.ErrAuthorization) || c.count(RefusedNoCredential) == 0 {
		t.Errorf("without a credential: %v", err)
	}
	if n := strings.Count(c.log.String(), "\n"); n > 2 {
		t.Errorf("six clients turned away fill %d lines:\n%s", n, c.log)
	}
}

func TestAnonymousIsForLoopbackOnly(t *testing.T) {
	a, err := OpenAccess(AccessSettings{Anonymous: true})
	if err != nil {
		t.Fatal(err)
	}
	for address, want := range map[string]string{"127.0.0.1:9": "", "[::1]:9": "", "127.8.0.1:1": "", "192.0.2.7:9": RefusedNoCredential,
		"[2001:db8::1]:9": RefusedNoCredential} {
		remote, err := net.ResolveTCPAddr("tcp", address)
		if err != nil {
			t.Fatal(err)
		}
		if got := a.MaySpeak("", "", "northmoor", remote); got != want {
			t.Errorf("%s: %q, want %q", address, got, want)
		}
	}
	if a.MaySpeak("", "", "northmoor", nil) == "" {
		t.Error("one who comes from nowhere may speak")
	}
	for address, want := range map[string]bool{"127.0.0.1:4222": true, "localhost:1": true, "[::1]:1": true, ":4222": false, "0.0.0.0:1": false, "host": false} {
		if LoopbackOnly(address) != want {
			t.Errorf("%s: %v", address, !want)
		}
	}
}

func TestARevokedCredentialIsCutOffWithoutARestart(t *testing.T) {
	c := newCheckpoint(t)
	goes := []Secret{c.credential(RoleStation, "northmoor", false), c.credential(RoleStation, "northmoor", true)}
	stays := c.credential(RoleStation, "southmoor", false)
	c.open(false, nil)
	var cut []chan error
	for _, s := range goes {
		_, errs, err := c.connect(s)
		c.must(err)
		cut = append(cut, errs)
	}
	other, _, err := c.connect(stays)
	c.must(err)
	if why := c.access.MaySpeak(goes[0].Name, goes[0].Password, "northmoor", nil); why != "" {
		t.Fatal(why)
	}
	for _, s := range goes {
		c.must(c.book.Revoke(s.Name, time.Now()))
	}
	c.must(c.book.Write(c.file))
	changed, err := c.access.Reload()
	if err != nil || !changed {
		t.Fatal(changed, err)
	}
	for i, s := range goes {
		c.expect(cut[i], nats.ErrConnectionClosed.Error())
		if _, _, err := c.connect(s); !errors.Is(err, nats.ErrAuthorization) {
			t.Errorf("%s connects again: %v", s.Name, err)
		}
	}
	if why := c.access.MaySpeak(goes[0].Name, goes[0].Password, "northmoor", nil); why != RefusedRevoked || c.access.Holds(goes[0].Name) {
		t.Errorf("by another way: %q", why)
	}
	if err := other.Flush(); err != nil || !c.access.Holds(stays.Name) {
		t.Errorf("the other station is harmed: %v", err)
	}
	if err := c.book.Revoke(goes[0].Name, time.Now()); err == nil {
		t.Error("revoked twice")
	}
	// A broken book changes nothing.
	c.must(os.WriteFile(c.file, []byte("- name: ["), 0o600))
	if _, err := c.access.Reload(); err == nil || !c.access.Holds(stays.Name) {
		t.Errorf("a broken book: %v", err)
	}
}

func TestOneWhoConnectsAndSaysNothingIsCutOff(t *testing.T) {
	c := newCheckpoint(t)
	c.credential(RoleStation, "northmoor", false)
	c.authSeconds = 0.2
	c.open(false, nil)
	conn, err := net.Dial("tcp", strings.TrimPrefix(c.server.URL(), "nats://"))
	c.must(err)
	defer conn.Close()
	c.must(conn.SetDeadline(time.Now().Add(time.Minute)))
	if text, err := io.ReadAll(conn); err != nil || !strings.Contains(string(text), "Authentication Timeout") {
		t.Errorf("%v: %q", err, text)
	}
	if c.count(RefusedSilent) != 1 {
		t.Errorf("%d counted", c.count(RefusedSilent))
	}
}

// authority signs certificates for a test, with an end of one's choice.
type authority struct {
	*testing.T
	cert *x509.Certificate
	key  *ecdsa.PrivateKey
	dir  string
}

func newAuthority(t *testing.T) *authority {
	a := &authority{T: t, dir: t.TempDir()}
	a.key, _ = ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	template := &x509.Certificate{SerialNumber: big.NewInt(1), Subject: pkix.Name{CommonName: "test"}, NotBefore: time.Now().Add(-time.Hour),
		NotAfter: time.Now().Add(time.Hour), IsCA: true, BasicConstraintsValid: true, KeyUsage: x509.KeyUsageCertSign}
	der, err := x509.CreateCertificate(rand.Reader, template, template, &a.key.PublicKey, a.key)
	if err != nil {
		t.Fatal(err)
	}
	a.cert, _ = x509.ParseCertificate(der)
	a.write("ca.pem", "CERTIFICATE", der)
	return a
}

func (a *authority) write(name, kind string, der []byte) string {
	path := filepath.Join(a.dir, name)
	if err := os.WriteFile(path, pem.EncodeToMemory(&pem.Block{Type: kind, Bytes: der}), 0o600); err != nil {
		a.Fatal(err)
	}
	return path
}

func (a *authority) sign(name string, from, to time.Time) TLSFiles {
	key, _ := ecdsa.GenerateKey(elliptic.P256(), rand.Reader)
	template := &x509.Certificate{SerialNumber: big.NewInt(time.Now().UnixNano()), Subject: pkix.Name{CommonName: name}, NotBefore: from, NotAfter: to,
		IPAddresses: []net.IP{net.IPv4(127, 0, 0, 1)}, ExtKeyUsage: []x509.ExtKeyUsage{x509.ExtKeyUsageServerAuth, x509.ExtKeyUsageClientAuth}}
	der, err := x509.CreateCertificate(rand.Reader, template, a.cert, &key.PublicKey, a.key)
	if err != nil {
		a.Fatal(err)
	}
	keyDER, _ := x509.MarshalECPrivateKey(key)
	return TLSFiles{Certificate: a.write(name+".pem", "CERTIFICATE", der), Key: a.write(name+".key", "EC PRIVATE KEY", keyDER)}
}

func TestCertificates(t *testing.T) {
	a := newAuthority(t)
	now := time.Now()
	good := a.sign("server", now.Add(-time.Hour), now.Add(time.Hour))
	expired := a.sign("old", now.Add(-2*time.Hour), now.Add(-time.Hour))
	good.ClientCA = filepath.Join(a.dir, "ca.pem")
	if _, _, err := ServerTLS(expired, now); err == nil || !strings.Contains(err.Error(), "renew it") {
		t.Errorf("an expired certificate of the server: %v", err)
	}
	config, certificate, err := ServerTLS(good, now)
	if err != nil {
		t.Fatal(err)
	}
	c := newCheckpoint(t)
	secret := c.credential(RoleStation, "northmoor", false)
	c.open(false, config)
	connect := func(files TLSFiles) error {
		client, err := ClientTLS(good.ClientCA, files.Certificate, files.Key)
		c.must(err)
		conn, _, err := c.connect(secret, nats.Secure(client))
		if err == nil {
			err = conn.Flush()
			conn.Close()
		}
		return err
	}
	c.must(connect(a.sign("client", now.Add(-time.Hour), now.Add(time.Hour))))
	if err := connect(expired); err == nil {
		t.Error("a client with an expired certificate is let in")
	}
	if err := connect(TLSFiles{}); err == nil {
		t.Error("a client without a certificate is let in")
	}
	if _, _, err := c.connect(secret); err == nil {
		t.Error("a client without TLS is let in")
	}
	if c.count(RefusedTLS) == 0 {
		t.Error("nothing is counted as tls")
	}
	// The server's own connection needs none of it.
	house, err := Connect(ConnectSettings{Embedded: c.server})
	c.must(err)
	defer house.Close()
	ctx, cancel := context.WithTimeout(t.Context(), time.Minute)
	defer cancel()
	c.must(house.EnsureStreams(ctx, StreamSettings{JournalBytes: 8 << 20, RefusedBytes: 1 << 20, ChangesBytes: 1 << 20, FindingsBytes: 1 << 20, LeaseTTL: time.Minute}))
	// A renewed certificate is taken up by itself.
	before := certificate.NotAfter()
	a.sign("server", now.Add(-time.Hour), now.Add(30*time.Minute))
	certificate.looked = time.Time{}
	if after := certificate.NotAfter(); !after.Before(before) {
		t.Error("the renewed certificate is not in use")
	}
}

func TestBooksAreStrict(t *testing.T) {
	for text, want := range map[string]string{
		"- {name: a, role: king, bcrypt: x}":                                                                           "role",
		"- {name: a, role: station, bcrypt: x}":                                                                        "names its station",
		"- {name: a, role: station, station: b}":                                                                       "either bcrypt or nkey",
		"- {name: a, role: station, station: b, bcrypt: secret}":                                                       "not a bcrypt hash",
		"- {name: a, role: operator, nkey: SUAKEY}":                                                                    "public key",
		"- {name: a, role: operator, password: x}":                                                                     "password not found",
		"- {name: A b, role: operator, bcrypt: x}":                                                                     "a name is",
		"- {name: a, role: edge, nkey: " + "UDXU4RCSJNZOIQHZNWXHXORDPRTGNJAHAHFRGZNEEJCPQTT2M7NLCNF4" + "}":            "password, not with an nkey",
		"- &a {name: a, role: operator, bcrypt: $2a$08$e0NRzZ5y1PZ6yq2Jm6h0BeYbQZk9m9xG5o6fZ0c9o7vWq4i3h1b6K}\n- *a\n": "used twice",
	} {
		if _, err := ParseBook([]byte(text)); err == nil || !strings.Contains(err.Error(), want) {
			t.Errorf("%s: %v, want %s", text, err, want)
		}
	}
}

func FuzzBook(f *testing.F) {
	b := Book{}
	_, _ = b.New(Credential{Role: RoleStation, Station: "northmoor"}, true, time.Unix(1e9, 0))
	file := filepath.Join(f.TempDir(), "book")
	if err := b.Write(file); err != nil {
		f.Fatal(err)
	}
	text, _ := os.ReadFile(file)
	f.Add(text)
	f.Add([]byte("- name: a\n  role: [\n"))
	f.Fuzz(func(t *testing.T, text []byte) {
		b, err := ParseBook(text)
		if err == nil {
			for i := range b.Credentials {
				if err := b.Credentials[i].check(); err != nil {
					t.Fatal(err)
				}
			}
		}
		_, _ = parseSecret("x", text)
	})
}
