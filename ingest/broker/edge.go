package broker

import (
	"context"
	"errors"
	"fmt"
	"net/url"
	"time"

	"github.com/nats-io/nats-server/v2/server"
	"github.com/nats-io/nats.go"
	"github.com/nats-io/nats.go/jetstream"
)

// An edge is a broker whose JetStream has a domain of its own and that joins its hub by a leaf node. The hub reads the edge's journal over
// that link, by a durable consumer that lives at the edge: what the hub has on disk is acknowledged there, and by that the edge knows
// what it may forget. Edges join an account of their own at the hub, in which nothing else is: neither sees what the other publishes,
// and no subject of the hub's streams matches anything of theirs.

const (
	edgesAccount   = "EDGES"
	houseEdgesName = "this-process-edges"
	hubConsumer    = "HUB"
	leafRetry      = 2 * time.Second
	hubAckWait     = 10 * time.Second
	hubAckPending  = 2000
)

// LeafSettings make a broker an edge, or a hub, or neither.
type LeafSettings struct {
	Host string // hub: to listen on for edges; empty for none
	Port int

	Hub    string // edge: URL of the hub, nats-leaf://host:port or tls://host:port; empty for none
	Secret Secret // edge: its name is the domain
	CA     string // edge: file of the authority that signed the hub's certificate
}

func (s *EmbeddedSettings) leaf(o *server.Options) error {
	l := &s.Leaf
	if l.Host != "" {
		o.JetStreamDomain = "hub"
		o.LeafNode = server.LeafNodeOpts{Host: l.Host, Port: l.Port, TLSConfig: s.TLS, TLSTimeout: tlsTimeoutSeconds, AuthTimeout: authTimeoutSeconds,
			IsolateLeafnodeInterest: true, NoAdvertise: true}
	}
	if l.Hub == "" {
		return nil
	}
	if l.Host != "" {
		return errors.New("broker: settings: one daemon is an edge or a hub, not both")
	}
	u, err := url.Parse(l.Hub)
	if err != nil || u.Port() == "" {
		return fmt.Errorf("broker: settings: hub %q: write nats-leaf://host:7422 or tls://host:7422", l.Hub)
	}
	secure := u.Scheme == "tls"
	u.Scheme, u.User = "nats-leaf", url.UserPassword(l.Secret.Name, l.Secret.Password)
	remote := &server.RemoteLeafOpts{URLs: []*url.URL{u}, TLS: secure}
	if secure {
		if remote.TLSConfig, err = ClientTLS(l.CA, "", ""); err != nil {
			return err
		}
		remote.TLSConfig.ServerName = u.Hostname()
		remote.TLSTimeout = tlsTimeoutSeconds
	}
	o.JetStreamDomain = l.Secret.Name
	o.ServerName = l.Secret.Name
	o.LeafNode = server.LeafNodeOpts{Remotes: []*server.RemoteLeafOpts{remote}, ReconnectInterval: leafRetry}
	return nil
}

// edgesAccount makes the account that edges join; before that none is let in.
func (e *Embedded) openEdges() {
	account, _ := e.server.LookupOrRegisterAccount(edgesAccount)
	e.access.mu.Lock()
	e.access.edges = account
	e.access.mu.Unlock()
}

// checkLeaf lets an edge in.
func (a *Access) checkLeaf(client server.ClientAuthentication) bool {
	o := client.GetOpts()
	c, reason := a.prove(o.Username, o.Password)
	if c != nil && c.Role != RoleEdge {
		reason = RefusedSubject
	}
	a.mu.Lock()
	account := a.edges
	a.mu.Unlock()
	if reason != "" || account == nil {
		a.Refused("edge", reason)
		return false
	}
	client.RegisterUser(&server.User{Username: c.Name, Account: account})
	a.mu.Lock()
	defer a.mu.Unlock()
	if a.byName[c.Name] != c {
		return false
	}
	if a.leaves == nil {
		a.leaves = map[uint64]string{}
	}
	a.leaves[client.GetID()] = c.Name
	return true
}

// Edges are the names of the edges that may join.
func (a *Access) Edges() []string {
	a.mu.Lock()
	defer a.mu.Unlock()
	var names []string
	for name, c := range a.byName {
		if c.Role == RoleEdge && c.Revoked.IsZero() {
			names = append(names, name)
		}
	}
	return names
}

// Joined says whether an edge's link to its hub stands.
func (e *Embedded) Joined() bool { return e.server.NumLeafNodes() > 0 }

// ConnectEdges connects to the edges' account of a hub in this process.
func ConnectEdges(e *Embedded) (*Broker, error) {
	conn, err := nats.Connect("", nats.InProcessServer(e.server), nats.UserInfo(houseEdgesName, e.access.house), nats.MaxReconnects(-1), nats.Name("fluxwarden hub"))
	if err != nil {
		return nil, fmt.Errorf("broker: edges: %w", err)
	}
	js, err := jetstream.New(conn)
	if err != nil {
		conn.Close()
		return nil, fmt.Errorf("broker: edges: %w", err)
	}
	return &Broker{conn, js}, nil
}

// An EdgeState is what an edge knows of what its hub has.
type EdgeState struct {
	Forwarded uint64 // all entries up to and with it are on the hub's disk
	Unsent    uint64 // entries that are not
}

// ForHub makes the consumer by which the hub reads the journal of this edge, and says how far it is.
func (b *Broker) ForHub(ctx context.Context) (EdgeState, error) {
	stream, err := b.JS.Stream(ctx, JournalStream)
	if err != nil {
		return EdgeState{}, fmt.Errorf("broker: stream %s: %w", JournalStream, err)
	}
	c, err := stream.Consumer(ctx, hubConsumer)
	if errors.Is(err, jetstream.ErrConsumerNotFound) {
		c, err = stream.CreateConsumer(ctx, jetstream.ConsumerConfig{Durable: hubConsumer, AckPolicy: jetstream.AckExplicitPolicy, AckWait: hubAckWait,
			MaxAckPending: hubAckPending, DeliverPolicy: jetstream.DeliverAllPolicy})
	}
	if err != nil {
		return EdgeState{}, fmt.Errorf("broker: consumer %s: %w", hubConsumer, err)
	}
	info, err := c.Info(ctx)
	if err != nil {
		return EdgeState{}, fmt.Errorf("broker: consumer %s: %w", hubConsumer, err)
	}
	return EdgeState{info.AckFloor.Stream, info.NumPending + uint64(info.NumAckPending)}, nil
}

// An EdgeEntry is one entry of an edge's journal, to be acknowledged when it is on the hub's disk.
type EdgeEntry struct {
	Partition int
	Stored    time.Time // at the edge
	ID        string    // the same for the same entry, however often it comes
	Payload   []byte
	msg       jetstream.Msg
}

// Ack tells the edge that the hub has it.
func (e *EdgeEntry) Ack() error { return e.msg.Ack() }

// FetchEdge fetches some entries of an edge's journal; none where the edge has none that are new. edges is a connection of ConnectEdges.
func FetchEdge(ctx context.Context, edges *Broker, edge string, most int) ([]EdgeEntry, error) {
	js, err := jetstream.NewWithDomain(edges.Conn, edge)
	if err != nil {
		return nil, err
	}
	ask, cancel := context.WithTimeout(ctx, connectTimeout)
	defer cancel()
	consumer, err := js.Consumer(ask, JournalStream, hubConsumer)
	if err != nil {
		return nil, fmt.Errorf("broker: edge %s: %w", edge, err)
	}
	batch, err := consumer.Fetch(most, jetstream.FetchMaxWait(connectTimeout))
	if err != nil {
		return nil, fmt.Errorf("broker: edge %s: %w", edge, err)
	}
	var entries []EdgeEntry
	for m := range batch.Messages() {
		meta, err := m.Metadata()
		if err != nil {
			return entries, fmt.Errorf("broker: edge %s: %w", edge, err)
		}
		partition, ok := partitionOfSubject(m.Subject())
		if !ok {
			_ = m.Ack() // nothing of ours
			continue
		}
		entries = append(entries, EdgeEntry{partition, meta.Timestamp, fmt.Sprintf("%s-%d-%d", edge, meta.Timestamp.UnixNano(), meta.Sequence.Stream), m.Data(), m})
	}
	return entries, batch.Error()
}

// AppendJournal writes entries to this broker's journal and returns when all are on disk. One without a payload is passed over.
func (b *Broker) AppendJournal(ctx context.Context, entries []EdgeEntry) error {
	acks := make([]jetstream.PubAckFuture, len(entries))
	for i := range entries {
		if entries[i].Payload == nil {
			continue
		}
		m := &nats.Msg{Subject: JournalSubject(entries[i].Partition), Data: entries[i].Payload, Header: nats.Header{}}
		m.Header.Set(jetstream.MsgIDHeader, entries[i].ID) // one that comes again soon is not stored twice; later ones the archive drops
		var err error
		if acks[i], err = b.JS.PublishMsgAsync(m, jetstream.WithExpectStream(JournalStream)); err != nil {
			return fmt.Errorf("broker: stream %s: %w", JournalStream, err)
		}
	}
	for _, a := range acks {
		if a == nil {
			continue
		}
		select {
		case <-a.Ok():
		case err := <-a.Err():
			return fmt.Errorf("broker: stream %s: %w", JournalStream, err)
		case <-ctx.Done():
			return ctx.Err()
		}
	}
	return nil
}
