package broker

import (
	"cmp"
	"context"
	"crypto/tls"
	"errors"
	"fmt"
	"log/slog"
	"os"
	"path/filepath"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
)

// Limits and times of the embedded server.
const (
	// MessageBytesMax is what the server takes from any connection: a journal frame of many readings must fit. A client
	// that sends more is cut off by the protocol; one that sends more than a payload may have gets an answer from the gate.
	MessageBytesMax  = 8 << 20
	memoryBytesMax   = 64 << 20 // for streams in memory: there are none of ours
	readyWait        = 30 * time.Second
	connectionsMax   = 8192
	pingInterval     = 10 * time.Second
	clientPendingMax = 64 << 20

	// How long a client may take to say who it is, and for TLS. A slow radio link needs some seconds.
	authTimeoutSeconds = 10
	tlsTimeoutSeconds  = 10
)

// EmbeddedSettings are what the embedded server is given. StoreDir and StoreBytes are needed.
type EmbeddedSettings struct {
	Name       string      // of the server; empty is "fluxwarden"
	StoreDir   string      // made where it is absent
	Listen     bool        // take TCP connections; without it there are only those of this process
	Host       string      // to listen on; empty is 127.0.0.1
	Port       int         // to listen on; 0 is any free one
	StoreBytes int64       // all streams together; the streams' own bounds must fit in
	Access     *Access     // who may speak; nil: whoever comes from loopback
	TLS        *tls.Config // nil: none
	Leaf       LeafSettings
	Log        *slog.Logger

	authSeconds float64 // for a client to say who it is; 0 is authTimeoutSeconds
}

// Embedded is a NATS server in this process, with JetStream on disk and every write synced.
type Embedded struct {
	server *server.Server
	access *Access
	unlock func()
}

// StartEmbedded starts the server and waits until it answers. One store directory is for one process: a second one is
// refused, since two would overwrite each other's files.
func StartEmbedded(ctx context.Context, s EmbeddedSettings) (*Embedded, error) {
	if s.StoreDir == "" || s.StoreBytes <= 0 {
		return nil, errors.New("broker: settings: a store directory and its size in bytes are needed")
	}
	if err := os.MkdirAll(s.StoreDir, 0o750); err != nil {
		return nil, fmt.Errorf("broker: store directory: %w: make it writable for uid %d, or name another", err, os.Getuid())
	}
	unlock, err := lockFile(filepath.Join(s.StoreDir, "lock"))
	if err != nil {
		return nil, fmt.Errorf("broker: store directory %s: %w", s.StoreDir, err)
	}
	if s.Access == nil {
		s.Access, _ = OpenAccess(AccessSettings{Anonymous: true}) // without a book it cannot fail
	}
	options := embeddedOptions(s)
	if err := s.leaf(options); err != nil {
		unlock()
		return nil, err
	}
	srv, err := server.NewServer(options)
	if err != nil {
		unlock()
		return nil, fmt.Errorf("broker: embedded server: %w", err)
	}
	log := &serverLog{log: s.Log, access: s.Access, gone: make(chan struct{})}
	srv.SetLogger(log, true, false)
	srv.Start()
	e := &Embedded{srv, s.Access, unlock}
	s.Access.mu.Lock()
	s.Access.cut = e.disconnect
	s.Access.mu.Unlock()
	if err := waitReady(ctx, srv, log.gone); err != nil {
		e.Stop()
		if last := log.lastError(); last != "" {
			err = fmt.Errorf("%w: %s", err, last)
		}
		return nil, fmt.Errorf("broker: embedded server on %s:%d: %w", s.host(), s.Port, err)
	}
	if s.Leaf.Host != "" {
		e.openEdges()
	}
	if !srv.JetStreamEnabled() {
		e.Stop()
		return nil, fmt.Errorf("broker: embedded server: its store in %s could not be opened: %s", s.StoreDir, log.lastError())
	}
	return e, nil
}

func (s *EmbeddedSettings) host() string {
	if s.Host == "" {
		return "127.0.0.1"
	}
	return s.Host
}

func embeddedOptions(s EmbeddedSettings) *server.Options {
	name, port := s.Name, s.Port
	if name == "" {
		name = "fluxwarden"
	}
	if port == 0 {
		port = server.RANDOM_PORT
	}
	return &server.Options{
		ServerName: name, Host: s.host(), Port: port, DontListen: !s.Listen,
		JetStream: true, StoreDir: s.StoreDir, SyncAlways: true,
		JetStreamMaxStore: s.StoreBytes, JetStreamMaxMemory: memoryBytesMax,
		MaxPayload: MessageBytesMax, MaxPending: clientPendingMax, MaxConn: connectionsMax,
		PingInterval: pingInterval, NoSigs: true, NoLog: false,
		CustomClientAuthentication: s.Access, AlwaysEnableNonce: true, AuthTimeout: cmp.Or(s.authSeconds, authTimeoutSeconds),
		TLSConfig: s.TLS, TLSTimeout: tlsTimeoutSeconds,
	}
}

// disconnect ends the connections of credentials that hold no more, by name or nkey.
func (e *Embedded) disconnect(gone map[string]bool) {
	list, err := e.server.Connz(&server.ConnzOptions{Username: true, Limit: 2 * connectionsMax, State: server.ConnOpen})
	if err != nil {
		return
	}
	for _, c := range list.Conns {
		if gone[c.AuthorizedUser] {
			_ = e.server.DisconnectClientByID(c.Cid) // an error says that it has gone already
		}
	}
	e.access.mu.Lock()
	defer e.access.mu.Unlock()
	for id, name := range e.access.leaves {
		if gone[name] {
			go e.server.DisconnectClientByID(id)
			delete(e.access.leaves, id)
		}
	}
}

func waitReady(ctx context.Context, srv *server.Server, gone <-chan struct{}) error {
	ready := make(chan bool, 1)
	go func() { ready <- srv.ReadyForConnections(readyWait) }()
	select {
	case ok := <-ready:
		if !ok {
			return fmt.Errorf("not ready within %s", readyWait)
		}
		return nil
	case <-gone:
		return errors.New("it gave up")
	case <-ctx.Done():
		return ctx.Err()
	}
}

// URL is where clients on this machine reach the server; empty where it does not listen.
func (e *Embedded) URL() string {
	if e.server.Addr() == nil {
		return ""
	}
	return e.server.ClientURL()
}

// InProcess is the option that connects to the server without a socket.
func (e *Embedded) InProcess() nats.Option {
	return func(o *nats.Options) error {
		o.User, o.Password = houseName, e.access.house
		return nats.InProcessServer(e.server)(o)
	}
}

// Stop ends the server, waits for it, and gives its directory free.
func (e *Embedded) Stop() {
	e.server.Shutdown()
	e.server.WaitForShutdown()
	e.unlock()
}
