package broker

import (
	"bytes"
	"context"
	"crypto/tls"
	"fmt"
	"math/rand/v2"
	"os"
	"time"

	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
	"github.com/nats-io/nkeys"
)

const (
	retryFirst     = 100 * time.Millisecond
	retryMost      = 10 * time.Second
	connectTimeout = 5 * time.Second
	ackTimeout     = 30 * time.Second // an acknowledgement that has not come by then is waited for no more
	reconnectBytes = 8 << 20          // written while there is no connection; more is refused
)

// A State is what is known of the connection.
type State struct {
	Connected bool
	URL       string
	Err       error // why not, or what went wrong on a connection that still stands
	Closed    bool  // for good: the program has closed it, or the broker will not have it
}

// ConnectSettings say where the broker is and who we are.
type ConnectSettings struct {
	URL         string      // nats://host:port, several with commas; not used with Embedded
	Embedded    *Embedded   // connect inside the process
	Credentials string      // file of a secret (Secret), or with a JWT and its key; optional
	TLS         *tls.Config // optional
	Name        string      // of this connection, for the broker's own lists
	OnState     func(State) // called from the client's goroutines; optional
}

// Broker is a connection that comes back by itself, and JetStream on it.
type Broker struct {
	Conn *nats.Conn
	JS   jetstream.JetStream
}

// Connect connects and goes on trying for ever, with growing and jittered pauses, also where the broker is down at the start.
// It returns at once; what becomes of it is told to OnState.
func Connect(s ConnectSettings) (*Broker, error) {
	tell := s.OnState
	if tell == nil {
		tell = func(State) {}
	}
	state := func(err error) func(*nats.Conn) {
		return func(c *nats.Conn) {
			tell(State{Connected: c.IsConnected(), URL: c.ConnectedUrlRedacted(), Err: err, Closed: c.IsClosed()})
		}
	}
	options := []nats.Option{
		nats.Name(s.Name), nats.RetryOnFailedConnect(true), nats.MaxReconnects(-1), nats.Timeout(connectTimeout),
		nats.CustomReconnectDelay(retryDelay), nats.PingInterval(pingInterval), nats.MaxPingsOutstanding(2),
		nats.ReconnectBufSize(reconnectBytes),
		nats.ConnectHandler(state(nil)), nats.ReconnectHandler(state(nil)), nats.ClosedHandler(func(c *nats.Conn) { state(c.LastError())(c) }),
		nats.ReconnectErrHandler(func(c *nats.Conn, err error) { state(err)(c) }),
		nats.DisconnectErrHandler(func(c *nats.Conn, err error) { state(err)(c) }),
		nats.ErrorHandler(func(c *nats.Conn, _ *nats.Subscription, err error) { state(err)(c) }),
	}
	if s.TLS != nil {
		options = append(options, nats.Secure(s.TLS))
	}
	if s.Credentials != "" {
		who, err := credentialsOption(s.Credentials)
		if err != nil {
			return nil, err
		}
		options = append(options, who...)
	}
	url := s.URL
	if s.Embedded != nil {
		url = nats.DefaultURL
		options = append(options, s.Embedded.InProcess())
	}
	conn, err := nats.Connect(url, options...)
	if err != nil {
		return nil, fmt.Errorf("broker: %s: %w: is the address right", s.URL, err)
	}
	js, err := jetstream.New(conn, jetstream.WithPublishAsyncTimeout(ackTimeout))
	if err != nil {
		conn.Close()
		return nil, fmt.Errorf("broker: jetstream: %w", err)
	}
	return &Broker{conn, js}, nil
}

// credentialsOption reads either kind of file: ours, or that of a broker with accounts of its own.
func credentialsOption(path string) ([]nats.Option, error) {
	text, err := os.ReadFile(path)
	if err != nil {
		return nil, fmt.Errorf("credentials: %w", err)
	}
	if bytes.Contains(text, []byte("-----BEGIN NATS USER JWT-----")) {
		return []nats.Option{nats.UserCredentials(path)}, nil
	}
	secret, err := parseSecret(path, text)
	if err != nil {
		return nil, err
	}
	return secret.options()
}

// options are those of a connection that shows the secret, and has its inboxes where a station may hear answers.
func (s Secret) options() ([]nats.Option, error) {
	var options []nats.Option
	if s.Station != "" {
		options = append(options, nats.CustomInboxPrefix(AnswerPrefix+s.Station))
	}
	if s.Password != "" {
		return append(options, nats.UserInfo(s.Name, s.Password)), nil
	}
	pair, err := nkeys.FromSeed([]byte(s.Seed))
	if err != nil {
		return nil, fmt.Errorf("credentials: %s: the seed is not one of an nkey", s.Name)
	}
	public, err := pair.PublicKey()
	if err != nil {
		return nil, fmt.Errorf("credentials: %s: the seed is not one of an nkey", s.Name)
	}
	return append(options, nats.Nkey(public, pair.Sign)), nil
}

// Connected says whether the broker answers now.
func (b *Broker) Connected() bool { return b.Conn.IsConnected() }

// Publish writes a message to the stream that its subject belongs to, and returns when it is on disk.
func (b *Broker) Publish(ctx context.Context, subject string, data []byte) error {
	if _, err := b.JS.Publish(ctx, subject, data); err != nil {
		return fmt.Errorf("broker: publish to %s: %w", subject, err)
	}
	return nil
}

// FindingSubject is where changes to a station's episodes are published, in the stream FINDINGS.
func FindingSubject(station string) string { return findingsPrefix + station }

// Close ends the connection for good.
func (b *Broker) Close() { b.Conn.Close() }

// retryDelay doubles from a tenth of a second to ten, each with up to half of it added by chance, so that many
// stations do not come back at one moment.
func retryDelay(attempts int) time.Duration {
	d := retryMost
	if attempts < 7 {
		d = retryFirst << max(attempts, 0)
	}
	return d + rand.N(d/2)
}

// retry calls f until it succeeds, or says that trying again is of no use, or ctx ends.
func retry(ctx context.Context, f func(context.Context) (again bool, err error)) error {
	for attempt := 0; ; attempt++ {
		once, cancel := context.WithTimeout(ctx, connectTimeout)
		again, err := f(once)
		cancel()
		if err == nil || !again {
			return err
		}
		timer := time.NewTimer(retryDelay(attempt))
		select {
		case <-ctx.Done():
			timer.Stop()
			return fmt.Errorf("%w (last: %w)", ctx.Err(), err)
		case <-timer.C:
		}
	}
}
