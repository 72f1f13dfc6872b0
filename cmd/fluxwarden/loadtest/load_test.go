package loadtest

import (
	"context"
	"encoding/json"
	"flag"
	"fmt"
	"net/http"
	"os"
	"path/filepath"
	"slices"
	"strconv"
	"strings"
	"sync"
	"sync/atomic"
	"testing"
	"time"

	"fluxwarden/cmd/fluxwarden/daemon"
	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/gate"
	"fluxwarden/qc/engine"
	"fluxwarden/rules"
)

var (
	load     = flag.Bool("load", false, "measure under load; takes minutes")
	loadFor  = flag.Duration("loadfor", 60*time.Second, "how long each load lasts")
	stations = flag.Int("stations", 2000, "stations of the full load")
)

const channels = 12

func siteOf(n int) string {
	var s strings.Builder
	s.WriteString("network: {id: load}\nstations:\n")
	for i := range n {
		fmt.Fprintf(&s, "  - id: s%04d\n    latitude: %.2f\n    longitude: %.2f\n    elevation: 100\n    time: {interval: 1s}\n    instruments:\n", i, -60+float64(i%1200)/10, float64(i%3600)/10-180)
		s.WriteString("      - {id: G1, measures: global, class: A, input: {irradiance: c0}}\n      - {id: P1, measures: direct, class: A, input: {irradiance: c1}}\n      - {id: D1, measures: diffuse, class: A, input: {irradiance: c2}}\n")
		s.WriteString("    weather: {air_temperature: c3, humidity: c4, pressure: c5}\n")
	}
	return s.String()
}

func start(t *testing.T, n int, onMinutes func(*engine.Judged, int, int)) *daemon.Daemon {
	t.Helper()
	if !*load {
		t.Skip("asked for by -load")
	}
	text := []byte(siteOf(n))
	site, err := rules.Parse("load.yaml", text)
	if err != nil {
		t.Fatal(err)
	}
	dir := t.TempDir()
	s := daemon.DefaultSettings()
	s.Archive, s.Listen, s.Broker.Store, s.Broker.Listen, s.Ways.State = filepath.Join(dir, "archive"), "127.0.0.1:0", filepath.Join(dir, "journal"), "127.0.0.1:0", dir
	s.Grace = daemon.Duration(time.Second)
	d, err := daemon.Start(context.Background(), daemon.Config{Settings: s, Site: site, SiteText: text, Program: "load", OnMinutes: onMinutes})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(func() { _ = d.Stop() })
	for began := time.Now(); d.NotReady() != ""; time.Sleep(50 * time.Millisecond) {
		if time.Since(began) > 2*time.Minute {
			t.Fatal(d.NotReady())
		}
	}
	return d
}

func reading(at time.Time) []byte {
	b := []byte(`{"t":"` + at.UTC().Format("2006-01-02T15:04:05Z") + `","x":{`)
	for c := range channels {
		if c > 0 {
			b = append(b, ',')
		}
		b = append(b, fmt.Sprintf(`"c%d":%d.%d`, c, 10+c, at.Second())...)
	}
	return append(b, "}}"...)
}

// A crowd is many stations that send a reading each second and wait for its answer.
type crowd struct {
	mu    sync.Mutex
	waits []time.Duration
	acked atomic.Int64
	bad   atomic.Int64
}

func (c *crowd) run(ctx context.Context, t *testing.T, d *daemon.Daemon, first, n int) *sync.WaitGroup {
	wg := &sync.WaitGroup{}
	for k := range (n + 99) / 100 {
		b, err := broker.Connect(broker.ConnectSettings{URL: d.BrokerURL(), Name: "load"})
		if err != nil {
			t.Fatal(err)
		}
		t.Cleanup(b.Close)
		for i := first + 100*k; i < min(first+100*(k+1), first+n); i++ {
			wg.Go(func() {
				subject := fmt.Sprintf("%ss%04d", gate.SubjectPrefix, i)
				next := time.Now().Truncate(time.Second).Add(time.Second + time.Duration(i%1000)*time.Millisecond)
				for {
					select {
					case <-ctx.Done():
						return
					case <-time.After(time.Until(next)):
					}
					began := time.Now()
					m, err := b.Conn.Request(subject, reading(next.Truncate(time.Second)), 20*time.Second)
					var r gate.Reply
					if err != nil || json.Unmarshal(m.Data, &r) != nil || !r.OK {
						c.bad.Add(1)
					} else {
						c.acked.Add(1)
						c.mu.Lock()
						c.waits = append(c.waits, time.Since(began))
						c.mu.Unlock()
					}
					next = next.Add(time.Second)
				}
			})
		}
	}
	return wg
}

func quantile(of []time.Duration, q float64) time.Duration {
	if len(of) == 0 {
		return 0
	}
	s := slices.Sorted(slices.Values(of))
	return s[int(q*float64(len(s)-1))]
}

func residentMiB() int {
	text, _ := os.ReadFile("/proc/self/status")
	for _, line := range strings.Split(string(text), "\n") {
		if v, ok := strings.CutPrefix(line, "VmHWM:"); ok {
			n, _ := strconv.Atoi(strings.Fields(v)[0])
			return n >> 10
		}
	}
	return 0
}

func metric(t *testing.T, d *daemon.Daemon, name string) float64 {
	t.Helper()
	resp, err := http.Get("http://" + d.Address() + "/metrics")
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	var b strings.Builder
	buf := make([]byte, 64<<10)
	for {
		n, err := resp.Body.Read(buf)
		b.Write(buf[:n])
		if err != nil {
			break
		}
	}
	for _, line := range strings.Split(b.String(), "\n") {
		if v, ok := strings.CutPrefix(line, name+" "); ok {
			x, _ := strconv.ParseFloat(v, 64)
			return x
		}
	}
	return 0
}

// TestFullLoad: all stations, twelve channels, once a second.
func TestFullLoad(t *testing.T) {
	d := start(t, *stations, nil)
	c := &crowd{}
	ctx, cancel := context.WithTimeout(t.Context(), *loadFor)
	defer cancel()
	wg := c.run(ctx, t, d, 0, *stations)
	<-ctx.Done()
	wg.Wait()
	ended := time.Now()
	for metric(t, d, "fluxwarden_worker_readings_total") < float64(c.acked.Load()) && time.Since(ended) < 2*time.Minute {
		time.Sleep(100 * time.Millisecond)
	}
	t.Logf("%d stations for %v: %d readings on disk (%.0f a second, %.0f wanted), %d not; answer p50 %v p99 %v; the worker was %v behind at the end; process with its senders %d MiB at most",
		*stations, *loadFor, c.acked.Load(), float64(c.acked.Load())/loadFor.Seconds(), float64(*stations), c.bad.Load(), quantile(c.waits, 0.5), quantile(c.waits, 0.99),
		time.Since(ended).Round(100*time.Millisecond), residentMiB())
}

// TestFlood: one station sends as fast as it can up to 30,000 messages a second, beside 100 that send once a second.
func TestFlood(t *testing.T) {
	d := start(t, 101, nil)
	c := &crowd{}
	ctx, cancel := context.WithTimeout(t.Context(), *loadFor/2)
	defer cancel()
	wg := c.run(ctx, t, d, 0, 100)
	b, err := broker.Connect(broker.ConnectSettings{URL: d.BrokerURL(), Name: "flood"})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	sent := 0
	payload := reading(time.Now())
	for ctx.Err() == nil {
		began := time.Now()
		for range 300 {
			_ = b.Conn.PublishRequest(gate.SubjectPrefix+"s0100", "answer", payload)
			sent++
		}
		time.Sleep(time.Until(began.Add(10 * time.Millisecond)))
	}
	wg.Wait()
	t.Logf("flood of %.0f messages a second: others %d answered, %d not, p50 %v p99 %v", float64(sent)/(loadFor.Seconds()/2), c.acked.Load(), c.bad.Load(),
		quantile(c.waits, 0.5), quantile(c.waits, 0.99))
	if c.bad.Load() > 0 {
		t.Error("readings of others were not acknowledged")
	}
}

// TestVerdictDelay: from a minute's end to its verdict, 200 stations.
func TestVerdictDelay(t *testing.T) {
	var mu sync.Mutex
	var delays []time.Duration
	began := time.Now()
	d := start(t, 200, func(j *engine.Judged, from, to int) {
		end := time.Unix((j.Day*1440+int64(to))*60, 0)
		if from < to && end.After(began.Add(time.Minute)) {
			mu.Lock()
			delays = append(delays, time.Since(end))
			mu.Unlock()
		}
	})
	c := &crowd{}
	ctx, cancel := context.WithTimeout(t.Context(), max(2*time.Minute+10*time.Second, *loadFor))
	defer cancel()
	wg := c.run(ctx, t, d, 0, 200)
	wg.Wait()
	mu.Lock()
	defer mu.Unlock()
	t.Logf("%d minutes of 200 stations: end to verdict p50 %v p99 %v (grace 1 s included)", len(delays), quantile(delays, 0.5), quantile(delays, 0.99))
}

// TestAgainstTheBroker: readings a second into the journal and judged, against what the same broker takes and hands out, each acknowledged.
func TestAgainstTheBroker(t *testing.T) {
	const batch = 20 // a station's readings in one request: a backlog
	d := start(t, 500, nil)
	b, err := broker.Connect(broker.ConnectSettings{URL: d.BrokerURL(), Name: "load"})
	if err != nil {
		t.Fatal(err)
	}
	defer b.Close()
	one := reading(time.Now())
	alone := 0
	for began := time.Now(); time.Since(began) < 10*time.Second; alone += 500 {
		var acks []func()
		for range 500 {
			a, err := b.JS.PublishAsync(broker.FindingSubject("s0000"), one) // a stream that nobody reads, synced as the journal is
			if err != nil {
				t.Fatal(err)
			}
			acks = append(acks, func() { <-a.Ok() })
		}
		for _, wait := range acks {
			wait()
		}
	}
	var taken atomic.Int64
	ctx, cancel := context.WithTimeout(t.Context(), 20*time.Second)
	defer cancel()
	var wg sync.WaitGroup
	began := time.Now()
	for i := range 500 {
		wg.Go(func() {
			at := time.Now().Add(-48 * time.Hour)
			for ctx.Err() == nil {
				payload := []byte{'['}
				for k := range batch {
					if k > 0 {
						payload = append(payload, ',')
					}
					payload = append(payload, reading(at)...)
					at = at.Add(time.Second)
				}
				m, err := b.Conn.Request(fmt.Sprintf("%ss%04d", gate.SubjectPrefix, i), append(payload, ']'), 20*time.Second)
				var r gate.Reply
				if err == nil && json.Unmarshal(m.Data, &r) == nil && r.OK {
					taken.Add(batch)
				}
			}
		})
	}
	wg.Wait()
	in := time.Since(began)
	for metric(t, d, "fluxwarden_worker_readings_total") < float64(taken.Load()) && time.Since(began) < 3*time.Minute {
		time.Sleep(200 * time.Millisecond)
	}
	all := time.Since(began)
	t.Logf("broker alone, each acknowledged: %d messages a second; through the gate in batches of %d: %.0f readings a second on disk (ratio %.2f), %.0f a second judged too (%d readings); 20 times 2,000 a second would be 40,000",
		alone/10, batch, float64(taken.Load())/in.Seconds(), float64(taken.Load())/in.Seconds()/(float64(alone)/10), float64(taken.Load())/all.Seconds(), taken.Load())
}
