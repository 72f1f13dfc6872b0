//go:build unix

package killtest

import (
	"bytes"
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"io"
	"math/rand/v2"
	"net"
	"net/http"
	"os"
	"os/exec"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
	"fluxwarden/store"
	"fluxwarden/store/vfs"
)

var (
	kills    = flag.Int("kills", 4, "how often to kill the program")
	killSeed = flag.Uint64("killseed", 1, "seed of the moments at which it is killed")
)

var stations = []string{"anvil", "birch", "cairn"}

const siteHead = "network: {id: kill, name: Killed}\nstations:\n"
const siteStation = `  - id: %s
    name: %s
    latitude: 47.5
    longitude: 8.5
    elevation: 500
    time: {label: start, interval: 60s}
    instruments:
      - {id: G1, measures: global, class: A, input: {irradiance: ghi}}
`

// A program is the daemon in a directory of its own.
type program struct {
	t             *testing.T
	dir, binary   string
	pages, broker string
	cmd           *exec.Cmd
	out           bytes.Buffer
}

func newProgram(t *testing.T) *program {
	t.Helper()
	p := &program{t: t, dir: t.TempDir(), pages: freeAddress(t), broker: freeAddress(t)}
	p.binary = filepath.Join(p.dir, "fluxwarden")
	build := exec.Command("go", "build", "-o", p.binary, "fluxwarden/cmd/fluxwarden")
	if out, err := build.CombinedOutput(); err != nil {
		t.Fatalf("build: %v\n%s", err, out)
	}
	text := siteHead
	for _, s := range stations {
		text += fmt.Sprintf(siteStation, s, s)
	}
	p.write("site.yaml", text)
	p.write("settings.yaml", fmt.Sprintf("archive: %s/archive\nlisten: %s\ncommit_every: 1s\ndisk_floor: 1MiB\nbroker:\n  store: %s/journal\n  listen: %s\n  journal: 64MiB\n  refused: 8MiB\n  findings: 8MiB\n",
		p.dir, p.pages, p.dir, p.broker))
	return p
}

func (p *program) write(name, text string) {
	if err := os.WriteFile(filepath.Join(p.dir, name), []byte(text), 0o600); err != nil {
		p.t.Fatal(err)
	}
}

func freeAddress(t *testing.T) string {
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	defer l.Close()
	return l.Addr().String()
}

// start starts the program and waits until it takes readings. It gives the time that took.
func (p *program) start() time.Duration {
	p.t.Helper()
	p.out.Reset()
	p.cmd = exec.Command(p.binary, "run", "--site", filepath.Join(p.dir, "site.yaml"), "--settings", filepath.Join(p.dir, "settings.yaml"))
	p.cmd.Stdout, p.cmd.Stderr = &p.out, &p.out
	began := time.Now()
	if err := p.cmd.Start(); err != nil {
		p.t.Fatal(err)
	}
	for time.Since(began) < 60*time.Second {
		resp, err := http.Get("http://" + p.pages + "/-/ready")
		if err == nil {
			_, _ = io.Copy(io.Discard, resp.Body)
			resp.Body.Close()
			if resp.StatusCode == http.StatusOK {
				return time.Since(began)
			}
		}
		time.Sleep(10 * time.Millisecond) // polling another process: there is nothing to wait on
	}
	p.kill()
	p.t.Fatalf("not ready within a minute:\n%s", p.out.String())
	return 0
}

func (p *program) kill() {
	_ = p.cmd.Process.Kill() // SIGKILL
	_ = p.cmd.Wait()
}

func (p *program) stop() {
	p.t.Helper()
	if err := p.cmd.Process.Signal(syscall.SIGTERM); err != nil {
		p.t.Fatal(err)
	}
	began := time.Now()
	if err := p.cmd.Wait(); err != nil {
		p.t.Errorf("stopped with %v:\n%s", err, p.out.String())
	}
	if took := time.Since(began); took > 5*time.Second {
		p.t.Errorf("stopping took %v", took)
	}
}

// A sender sends one station's readings, each until it is acknowledged, some twice.
type sender struct {
	station string
	broker  *broker.Broker
	acked   map[minute.Stamp]float64
	again   int
}

// It ends an hour before the present: minutes to come are kept, and judged when they have come.
func (s *sender) run(ctx context.Context, rng *rand.Rand, at time.Time) {
	for end := time.Now().Add(-time.Hour); ctx.Err() == nil && at.Before(end); {
		var readings []minute.Reading
		for range 1 + rng.IntN(20) {
			v := float64(rng.IntN(900))
			readings = append(readings, minute.Reading{At: minute.Stamp(at.UnixMicro()), Values: []minute.ChannelValue{{Channel: "ghi", Value: minute.Single(v)}}})
			at = at.Add(time.Minute)
		}
		payload := wire.EncodeJSON(nil, readings)
		times := 1
		if rng.IntN(10) == 0 {
			times = 2
		}
		for times > 0 && ctx.Err() == nil {
			if s.send(ctx, payload) {
				times--
				for i := range readings {
					s.acked[readings[i].At] = readings[i].Values[0].Mean
				}
			} else {
				s.again++
			}
		}
	}
}

func (s *sender) send(ctx context.Context, payload []byte) bool {
	once, cancel := context.WithTimeout(ctx, time.Second)
	defer cancel()
	m, err := s.broker.Conn.RequestWithContext(once, gate.SubjectPrefix+s.station, payload)
	if err != nil {
		select { // the program is down: its successor needs a moment
		case <-ctx.Done():
		case <-time.After(20 * time.Millisecond):
		}
		return false
	}
	var reply gate.Reply
	return json.Unmarshal(m.Data, &reply) == nil && reply.OK
}

// TestKilledUnderLoad kills the program again and again while readings come in. Nothing that was acknowledged may be missing
// or double in the archive.
func TestKilledUnderLoad(t *testing.T) {
	if testing.Short() {
		t.Skip("needs a minute: not with -short")
	}
	p := newProgram(t)
	rng := rand.New(rand.NewPCG(*killSeed, 1))
	ctx, cancel := context.WithCancel(context.Background())
	defer cancel()
	slowest := p.start()
	var wg sync.WaitGroup
	var senders []*sender
	begin := time.Now().UTC().Truncate(24 * time.Hour).Add(-20 * 24 * time.Hour)
	for i, id := range stations {
		b, err := broker.Connect(broker.ConnectSettings{URL: "nats://" + p.broker, Name: id})
		if err != nil {
			t.Fatal(err)
		}
		defer b.Close()
		s := &sender{station: id, broker: b, acked: map[minute.Stamp]float64{}}
		senders = append(senders, s)
		r := rand.New(rand.NewPCG(*killSeed, uint64(2+i)))
		wg.Go(func() { s.run(ctx, r, begin) })
	}
	for range *kills {
		time.Sleep(time.Duration(100+rng.IntN(1500)) * time.Millisecond) // the moment of the kill is the test
		p.kill()
		slowest = max(slowest, p.start())
	}
	time.Sleep(500 * time.Millisecond)
	cancel()
	wg.Wait()
	p.waitForAll(senders)
	p.stop()
	p.check(senders)
	n, again := 0, 0
	for _, s := range senders {
		n += len(s.acked)
		again += s.again
	}
	t.Logf("%d kills, %d acknowledged minutes, %d requests sent again, slowest start %v", *kills, n, again, slowest)
}

// waitForAll waits until the archive has as many values as were acknowledged.
func (p *program) waitForAll(senders []*sender) {
	p.t.Helper()
	for began := time.Now(); time.Since(began) < 60*time.Second; time.Sleep(200 * time.Millisecond) {
		a, err := store.Open(vfs.OS{}, filepath.Join(p.dir, "archive"))
		if err != nil {
			continue
		}
		all := true
		for _, s := range senders {
			kept, err := rawOf(a, s.station)
			for at := range s.acked {
				if err != nil || kept[at] == 0 {
					all = false
					break
				}
			}
		}
		if all {
			return
		}
	}
	p.t.Errorf("what was acknowledged is not in the archive within a minute:\n%s", p.out.String())
}

func rawOf(a *store.Archive, station string) (map[minute.Stamp]int, error) {
	kept := map[minute.Stamp]int{}
	err := a.ReadRaw(station, 0, 1<<20, func(b *minute.Batch) error {
		for _, at := range b.At {
			kept[at]++
		}
		return nil
	})
	return kept, err
}

func (p *program) check(senders []*sender) {
	a, err := store.Open(vfs.OS{}, filepath.Join(p.dir, "archive"))
	if err != nil {
		p.t.Fatal(err)
	}
	for _, s := range senders {
		kept, err := rawOf(a, s.station)
		if err != nil {
			p.t.Fatal(err)
		}
		for at := range s.acked {
			if kept[at] != 1 {
				p.t.Errorf("%s: %v was acknowledged and is %d times in raw", s.station, time.UnixMicro(int64(at)).UTC(), kept[at])
			}
		}
		rows := map[int64]int{}
		err = a.ReadMinutes(s.station, 0, 1<<32, []string{"time"}, func(r *store.Rows) error {
			for i := range r.Rows {
				rows[r.Minute(i)]++
			}
			return nil
		})
		if err != nil {
			p.t.Fatal(err)
		}
		for at := range s.acked {
			if n := rows[at.Minute()]; n != 1 {
				p.t.Errorf("%s: the minute %v is %d times among the judged ones", s.station, time.UnixMicro(int64(at)).UTC(), n)
			}
		}
	}
	found, err := a.Verify(func(int, int) {})
	if err != nil {
		p.t.Fatal(err)
	}
	for _, f := range found {
		if !strings.Contains(f.String(), "temporary") {
			p.t.Errorf("verify: %v", f)
		}
	}
}
