//go:build unix

package edgetest

import (
	"bytes"
	"encoding/json"
	"fmt"
	"io"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

const site = `network: {id: link, name: Link}
stations:
  - id: farpoint
    latitude: 47.5
    longitude: 8.5
    elevation: 500
    instruments: [{id: G1, measures: global, class: A, input: {irradiance: ghi}}]
`

// A link is a TCP proxy that can be cut and slowed.
type link struct {
	to       string
	listener net.Listener

	mu     sync.Mutex
	up     bool
	pause  time.Duration // before each piece of up to 1 KiB
	closes []io.Closer
}

func newLink(t *testing.T, to string) *link {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { l.Close() })
	k := &link{to: to, listener: l, up: true}
	go func() {
		for {
			in, err := l.Accept()
			if err != nil {
				return
			}
			go k.join(in)
		}
	}()
	return k
}

func (k *link) join(in net.Conn) {
	k.mu.Lock()
	up := k.up
	k.mu.Unlock()
	out, err := net.Dial("tcp", k.to)
	if !up || err != nil {
		in.Close()
		if err == nil {
			out.Close()
		}
		return
	}
	k.mu.Lock()
	k.closes = append(k.closes, in, out)
	k.mu.Unlock()
	go k.carry(in, out)
	k.carry(out, in)
}

func (k *link) carry(from, to net.Conn) {
	defer to.Close()
	defer from.Close()
	b := make([]byte, 32<<10)
	for {
		k.mu.Lock()
		pause := k.pause
		k.mu.Unlock()
		piece := b
		if pause > 0 {
			piece = b[:1<<10]
			time.Sleep(pause) // the slowness of the link is what is tested
		}
		n, err := from.Read(piece)
		if n > 0 {
			if _, err := to.Write(piece[:n]); err != nil {
				return
			}
		}
		if err != nil {
			return
		}
	}
}

func (k *link) set(up bool, pause time.Duration) {
	k.mu.Lock()
	defer k.mu.Unlock()
	k.up, k.pause = up, pause
	if !up {
		for _, c := range k.closes {
			c.Close()
		}
		k.closes = nil
	}
}

type program struct {
	*testing.T
	binary, dir, pages, broker string
	cmd                        *exec.Cmd
	out                        bytes.Buffer
}

func freeAddress(t *testing.T) string {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

func newProgram(t *testing.T, binary, more string) *program {
	p := &program{T: t, binary: binary, dir: t.TempDir(), pages: freeAddress(t), broker: freeAddress(t)}
	p.write("site.yaml", site)
	p.write("settings.yaml", fmt.Sprintf("archive: %[1]s/archive\nlisten: %[2]s\ncommit_every: 1s\ndisk_floor: 1MiB\nbroker:\n  store: %[1]s/journal\n  listen: %[3]s\n  journal: 64MiB\n  refused: 8MiB\n  findings: 8MiB\nways: {state: %[1]s/ways}\n%[4]s",
		p.dir, p.pages, p.broker, more))
	return p
}

func (p *program) write(name, text string) {
	if err := os.WriteFile(filepath.Join(p.dir, name), []byte(text), 0o600); err != nil {
		p.Fatal(err)
	}
}

func (p *program) start() {
	p.Helper()
	p.cmd = exec.Command(p.binary, "run", "--site", filepath.Join(p.dir, "site.yaml"), "--settings", filepath.Join(p.dir, "settings.yaml"))
	p.cmd.Stdout, p.cmd.Stderr = &p.out, &p.out
	if err := p.cmd.Start(); err != nil {
		p.Fatal(err)
	}
	p.Cleanup(p.kill)
	for began := time.Now(); time.Since(began) < time.Minute; time.Sleep(20 * time.Millisecond) {
		if resp, err := http.Get("http://" + p.pages + "/-/ready"); err == nil {
			resp.Body.Close()
			if resp.StatusCode == http.StatusOK {
				return
			}
		}
	}
	p.kill()
	p.Fatalf("not ready within a minute:\n%s", p.out.String())
}

func (p *program) kill() {
	_ = p.cmd.Process.Kill()
	_ = p.cmd.Wait()
}

// send sends minutes first to last of a day long ago, until each is acknowledged.
func (p *program) send(first, last int) {
	p.Helper()
	c, err := broker.Connect(broker.ConnectSettings{URL: "nats://" + p.broker})
	if err != nil {
		p.Fatal(err)
	}
	defer c.Close()
	for i := first; i <= last; i++ {
		r := minute.Reading{At: stampOf(i), Values: []minute.ChannelValue{{Channel: "ghi", Value: minute.Single(float64(i % 900))}}}
		for tries := 0; ; tries++ {
			m, err := c.Conn.Request(gate.SubjectPrefix+"farpoint", wire.EncodeJSON(nil, []minute.Reading{r}), 10*time.Second)
			var reply gate.Reply
			if err == nil && json.Unmarshal(m.Data, &reply) == nil && reply.OK {
				break
			}
			if tries > 20 {
				p.Fatalf("minute %d is not taken: %v %+v", i, err, reply)
			}
		}
	}
}

var begin = time.Now().UTC().Truncate(24 * time.Hour).Add(-4 * 24 * time.Hour)

func stampOf(i int) minute.Stamp {
	return minute.Stamp(begin.Add(time.Duration(i) * time.Minute).UnixMicro())
}

// has counts what the archive holds of each stamp, and the lines of the journal's metrics.
func (p *program) has() map[minute.Stamp]int {
	kept := map[minute.Stamp]int{}
	a, err := store.Open(vfs.OS{}, filepath.Join(p.dir, "archive"))
	if err != nil {
		return kept
	}
	_ = a.ReadRaw("farpoint", 0, 1<<20, func(b *minute.Batch) error {
		for _, at := range b.At {
			kept[at]++
		}
		return nil
	})
	return kept
}

func (p *program) waitFor(n int) {
	p.Helper()
	var kept map[minute.Stamp]int
	for began := time.Now(); time.Since(began) < 4*time.Minute; time.Sleep(300 * time.Millisecond) {
		if kept = p.has(); len(kept) >= n {
			break
		}
	}
	for i := 1; i <= n; i++ {
		if kept[stampOf(i)] != 1 {
			p.Fatalf("minute %d is %d times in the hub's archive (%d of %d there):\n%s", i, kept[stampOf(i)], len(kept), n, p.out.String())
		}
	}
}

func (p *program) metric(name string) string {
	resp, err := http.Get("http://" + p.pages + "/metrics")
	if err != nil {
		return ""
	}
	defer resp.Body.Close()
	text, _ := io.ReadAll(resp.Body)
	for _, line := range strings.Split(string(text), "\n") {
		if v, ok := strings.CutPrefix(line, name+" "); ok {
			return v
		}
	}
	return ""
}

// TestALinkThatFails: what an edge took while its link was cut is at the hub afterwards, each reading once, whichever of the two was killed
// meanwhile; a link that is slow, and cut again while it delivers, changes nothing.
func TestALinkThatFails(t *testing.T) {
	if testing.Short() {
		t.Skip("runs real processes for a minute: not with -short")
	}
	binary := filepath.Join(t.TempDir(), "fluxwarden")
	if out, err := exec.Command("go", "build", "-o", binary, "fluxwarden/cmd/fluxwarden").CombinedOutput(); err != nil {
		t.Fatalf("build: %v\n%s", err, out)
	}
	secrets := t.TempDir()
	book := broker.Book{}
	secret, err := book.New(broker.Credential{Role: broker.RoleEdge, Name: "far-edge"}, false, time.Now())
	if err != nil {
		t.Fatal(err)
	}
	bookFile, secretFile := filepath.Join(secrets, "book.yaml"), filepath.Join(secrets, "edge.secret")
	if err := book.Write(bookFile); err != nil {
		t.Fatal(err)
	}
	if err := secret.WriteSecret(secretFile); err != nil {
		t.Fatal(err)
	}
	leaf := freeAddress(t)
	hub := newProgram(t, binary, fmt.Sprintf("access: {credentials: %s, anonymous: loopback}\nhub: {listen: %s, catch_up_readings_per_second: 500}\n", bookFile, leaf))
	k := newLink(t, leaf)
	edge := newProgram(t, binary, fmt.Sprintf("edge: {hub: \"nats-leaf://%s\", credentials: %s}\n", k.listener.Addr(), secretFile))
	hub.start()
	edge.start()
	edge.send(1, 20)
	hub.waitFor(20)

	k.set(false, 0)
	edge.send(21, 400)
	hub.kill()
	edge.kill()
	edge.start() // keeps what the hub has not got
	edge.send(401, 800)
	hub.start()
	if n := len(hub.has()); n != 20 {
		t.Errorf("the hub has %d readings while the link is cut", n)
	}
	k.set(true, 50*time.Millisecond) // about 20 kB/s each way
	for began := time.Now(); len(hub.has()) == 20 && time.Since(began) < 3*time.Minute; {
		time.Sleep(200 * time.Millisecond)
	}
	k.set(false, 0) // in the middle of it
	edge.send(801, 820)
	k.set(true, 0)
	hub.waitFor(820)
	edge.send(821, 840)
	hub.waitFor(840)
	for began := time.Now(); edge.metric("fluxwarden_edge_unsent_entries") != "0"; time.Sleep(200 * time.Millisecond) {
		if time.Since(began) > time.Minute {
			t.Fatalf("the edge says that %s entries are unsent", edge.metric("fluxwarden_edge_unsent_entries"))
		}
	}
	t.Logf("840 readings, 2 kills, 2 cuts: each once at the hub; the hub counted %s repeats", hub.metric("fluxwarden_worker_duplicates_total"))

	// A revoked edge is cut off without a restart, and keeps what it has.
	if err := book.Revoke("far-edge", time.Now()); err != nil {
		t.Fatal(err)
	}
	if err := book.Write(bookFile); err != nil {
		t.Fatal(err)
	}
	for began := time.Now(); edge.metric("fluxwarden_edge_joined") != "0"; time.Sleep(200 * time.Millisecond) {
		if time.Since(began) > time.Minute {
			t.Fatal("a revoked edge is still joined")
		}
	}
}
