//go:build unix

package killtest

import (
	"context"
	"encoding/json"
	"fmt"
	"net/http"
	"os"
	"path/filepath"
	"strings"
	"syscall"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/qc/minute"
)

// ask sends one reading and gives the answer; false where none came.
func ask(b *broker.Broker, at time.Time) (gate.Reply, bool) {
	ctx, cancel := context.WithTimeout(context.Background(), 2*time.Second)
	defer cancel()
	payload := fmt.Sprintf(`{"t":%q,"x":{"ghi":500}}`, at.Format(time.RFC3339))
	m, err := b.Conn.RequestWithContext(ctx, gate.SubjectPrefix+stations[0], []byte(payload))
	if err != nil {
		return gate.Reply{}, false
	}
	var reply gate.Reply
	return reply, json.Unmarshal(m.Data, &reply) == nil
}

func (p *program) within(what string, f func() bool) {
	p.t.Helper()
	for began := time.Now(); time.Since(began) < 60*time.Second; time.Sleep(50 * time.Millisecond) { // another process: there is nothing to wait on
		if f() {
			return
		}
	}
	p.t.Fatalf("not within a minute: %s\n%s", what, p.out.String())
}

// A program that was held by SIGSTOP goes on where it was: what was acknowledged is there once.
func TestHeldAndLetGo(t *testing.T) {
	if testing.Short() {
		t.Skip("needs some seconds: not with -short")
	}
	p := newProgram(t)
	p.start()
	b, err := broker.Connect(broker.ConnectSettings{URL: "nats://" + p.broker, Name: "held"})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	s := &sender{station: stations[0], broker: b, acked: map[minute.Stamp]float64{}}
	at := time.Now().UTC().Truncate(24 * time.Hour).Add(-5 * 24 * time.Hour)
	take := func(n int) {
		for range n {
			p.within("an answer", func() bool { r, ok := ask(b, at); return ok && r.OK })
			s.acked[minute.Stamp(at.UnixMicro())] = 500
			at = at.Add(time.Minute)
		}
	}
	for range 3 {
		take(20)
		if err := p.cmd.Process.Signal(syscall.SIGSTOP); err != nil {
			t.Fatal(err)
		}
		if _, ok := ask(b, at); ok {
			t.Error("a held program answers")
		}
		if err := p.cmd.Process.Signal(syscall.SIGCONT); err != nil {
			t.Fatal(err)
		}
	}
	take(20)
	p.waitForAll([]*sender{s})
	p.stop()
	p.check([]*sender{s})
}

// A disk that is really full: readings are refused with a reason, the program lives, and takes them again when there is room. Nothing that it had
// taken is lost.
func TestAFullDiskIsWaitedOut(t *testing.T) {
	if testing.Short() {
		t.Skip("needs some seconds: not with -short")
	}
	p := newProgram(t)
	disk := filepath.Join(p.dir, "disk")
	if err := os.Mkdir(disk, 0o755); err != nil {
		t.Fatal(err)
	}
	if err := syscallMount(disk); err != nil {
		t.Skipf("no small disk can be mounted here (%v): run as root to test a full disk", err)
	}
	t.Cleanup(func() { _ = syscallUnmount(disk) })
	text, err := os.ReadFile(filepath.Join(p.dir, "settings.yaml"))
	if err != nil {
		t.Fatal(err)
	}
	p.write("settings.yaml", strings.NewReplacer("archive: "+p.dir+"/archive", "archive: "+disk+"/archive", "disk_floor: 1MiB", "disk_floor: 8MiB").Replace(string(text)))
	if err := os.Symlink(filepath.Join(disk, "archive"), filepath.Join(p.dir, "archive")); err != nil {
		t.Fatal(err)
	}
	p.start()
	b, err := broker.Connect(broker.ConnectSettings{URL: "nats://" + p.broker, Name: "full"})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	s := &sender{station: stations[0], broker: b, acked: map[minute.Stamp]float64{}}
	at := time.Now().UTC().Truncate(24 * time.Hour).Add(-5 * 24 * time.Hour)
	next := func() (gate.Reply, bool) {
		r, ok := ask(b, at)
		if ok && r.OK {
			s.acked[minute.Stamp(at.UnixMicro())] = 500
			at = at.Add(time.Minute)
		}
		return r, ok
	}
	p.within("an answer", func() bool { r, ok := next(); return ok && r.OK })
	ballast := filepath.Join(disk, "ballast")
	f, err := os.Create(ballast)
	if err != nil {
		t.Fatal(err)
	}
	block := make([]byte, 64<<10)
	for err == nil {
		_, err = f.Write(block)
	}
	f.Close()
	p.within("a refusal that says why", func() bool { r, ok := next(); return ok && !r.OK && r.Retry })
	if resp, err := http.Get("http://" + p.pages + "/-/healthy"); err != nil || resp.StatusCode != http.StatusOK {
		t.Errorf("the program is not alive on a full disk: %v", err)
	}
	if err := os.Remove(ballast); err != nil {
		t.Fatal(err)
	}
	p.within("readings are taken again", func() bool { r, ok := next(); return ok && r.OK })
	p.waitForAll([]*sender{s})
	p.stop()
	p.check([]*sender{s})
}
