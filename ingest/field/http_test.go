package field

import (
	"bufio"
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"log/slog"
	"net"
	"net/http"
	"net/http/httptest"
	"strings"
	"sync"
	"testing"
	"time"

	"fluxwarden/ingest/wire"
	"fluxwarden/qc/minute"
)

// A testDoor decodes as the gate does and keeps what it took.
type testDoor struct {
	mu     sync.Mutex
	taken  map[string][]minute.Reading
	answer func(station string, payload []byte) (Answer, error) // instead of taking; nil takes
}

func (d *testDoor) Take(_ context.Context, station string, payload []byte) (Answer, error) {
	d.mu.Lock()
	defer d.mu.Unlock()
	if d.answer != nil {
		if a, err := d.answer(station, payload); err != nil || a.Retry {
			return a, err
		}
	}
	var dec wire.Decoder
	readings, refused := dec.Decode(payload, nil)
	if d.taken == nil {
		d.taken = map[string][]minute.Reading{}
	}
	d.taken[station] = append(d.taken[station], readings...)
	a := Answer{OK: len(refused) == 0, N: len(readings)}
	for _, r := range refused {
		a.Refused = append(a.Refused, Refused{r.Index, string(r.Reason), r.Detail})
	}
	return a, nil
}

func (d *testDoor) of(station string) []minute.Reading {
	d.mu.Lock()
	defer d.mu.Unlock()
	return append([]minute.Reading(nil), d.taken[station]...)
}

// A testGuard knows one station's credential.
type testGuard struct {
	mu      sync.Mutex
	revoked bool
	turned  map[string]int
}

func (g *testGuard) MaySpeak(name, secret, station string, _ net.Addr) string {
	g.mu.Lock()
	defer g.mu.Unlock()
	switch {
	case name == "":
		return "no_credential"
	case name != "northmoor-1" || secret != "s3cret":
		return "wrong_credential"
	case g.revoked:
		return "revoked"
	case station != "" && station != "northmoor":
		return "subject"
	}
	return ""
}

func (g *testGuard) Holds(string) bool { g.mu.Lock(); defer g.mu.Unlock(); return !g.revoked }

func (g *testGuard) Refused(way, reason string) {
	g.mu.Lock()
	defer g.mu.Unlock()
	if g.turned == nil {
		g.turned = map[string]int{}
	}
	g.turned[way+" "+reason]++
}

func (g *testGuard) count(way, reason string) int {
	g.mu.Lock()
	defer g.mu.Unlock()
	return g.turned[way+" "+reason]
}

const oneReading = `{"t":"2026-06-21T12:00:01Z","x":{"g1_mv":8.213}}`

func TestHTTPAnswersAsTheGateDoes(t *testing.T) {
	door, guard := &testDoor{}, &testGuard{}
	server := httptest.NewServer(NewHTTPServer(door, guard, slog.New(slog.DiscardHandler)).Handler)
	defer server.Close()
	door.answer = func(_ string, payload []byte) (Answer, error) {
		switch string(payload) {
		case "busy":
			return Answer{Retry: true, Reason: "journal_full"}, nil
		case "fast":
			return Answer{Retry: true, Reason: "rate_limited"}, nil
		case "late":
			return Answer{}, errors.New("no answer")
		}
		return Answer{}, nil
	}
	for i, c := range []struct {
		method, station, user, secret, body string
		status                              int
		want                                string
	}{
		{"POST", "northmoor", "northmoor-1", "s3cret", oneReading, 200, `{"ok":true,"n":1}`},
		{"POST", "northmoor", "northmoor-1", "s3cret", "[" + oneReading + ",7]", 422, `"reason":"bad_value"`},
		{"POST", "northmoor", "northmoor-1", "s3cret", "hello", 422, `"reason":"not_json"`},
		{"POST", "northmoor", "northmoor-1", "s3cret", "busy", 503, `"retry":true,"reason":"journal_full"`},
		{"POST", "northmoor", "northmoor-1", "s3cret", "fast", 429, `"reason":"rate_limited"`},
		{"POST", "northmoor", "northmoor-1", "s3cret", "late", 503, `"reason":"broker_away"`},
		{"POST", "northmoor", "northmoor-1", "guess", oneReading, 401, `wrong_credential`},
		{"POST", "northmoor", "", "", oneReading, 401, `no_credential`},
		{"POST", "southmoor", "northmoor-1", "s3cret", oneReading, 403, `"reason":"subject"`},
		{"POST", "northmoor", "northmoor-1", "s3cret", strings.Repeat(" ", 10<<20), 413, `too_large`},
		{"GET", "northmoor", "northmoor-1", "s3cret", "", 405, ``},
	} {
		req, err := http.NewRequest(c.method, server.URL+HTTPPath+c.station, strings.NewReader(c.body))
		if err != nil {
			t.Fatal(err)
		}
		if c.user != "" && i%2 == 0 {
			req.SetBasicAuth(c.user, c.secret)
		} else if c.user != "" {
			req.Header.Set("Authorization", "Bearer "+c.user+":"+c.secret)
		}
		resp, err := http.DefaultClient.Do(req)
		if err != nil {
			t.Fatalf("case %d: %v", i, err)
		}
		body, _ := io.ReadAll(resp.Body)
		resp.Body.Close()
		if resp.StatusCode != c.status || !strings.Contains(string(body), c.want) {
			t.Errorf("case %d: %d %s, want %d %s", i, resp.StatusCode, body, c.status, c.want)
		}
		if (resp.Header.Get("Retry-After") != "") != (c.status == 503 || c.status == 429) {
			t.Errorf("case %d: Retry-After %q", i, resp.Header.Get("Retry-After"))
		}
		if strings.Contains(string(body), "s3cret") || strings.Contains(string(body), "guess") {
			t.Errorf("case %d: a secret in the answer", i)
		}
	}
	if n := len(door.of("northmoor")); n != 2 {
		t.Errorf("%d readings taken, want 2", n)
	}
	for _, reason := range []string{"wrong_credential", "no_credential", "subject", "too_large"} {
		if guard.count("http", reason) != 1 {
			t.Errorf("%s counted %d times", reason, guard.count("http", reason))
		}
	}
}

// A client that sends its payload a byte at a time is cut off when its time is up, and nobody waits for it.
func TestASlowHTTPClientIsCutOff(t *testing.T) {
	door, guard := &testDoor{}, &testGuard{}
	server := NewHTTPServer(door, guard, slog.New(slog.DiscardHandler))
	server.ReadTimeout = 300 * time.Millisecond
	l, err := net.Listen("tcp", "127.0.0.1:0")
	if err != nil {
		t.Fatal(err)
	}
	go server.Serve(l)
	defer server.Close()
	conn, err := net.Dial("tcp", l.Addr().String())
	if err != nil {
		t.Fatal(err)
	}
	defer conn.Close()
	fmt.Fprintf(conn, "POST %snorthmoor HTTP/1.1\r\nHost: x\r\nAuthorization: Bearer northmoor-1:s3cret\r\nContent-Length: 1000\r\n\r\n{", HTTPPath)
	if err := conn.SetReadDeadline(time.Now().Add(time.Minute)); err != nil {
		t.Fatal(err)
	}
	resp, err := http.ReadResponse(bufio.NewReader(conn), nil)
	if err != nil {
		t.Fatal(err)
	}
	defer resp.Body.Close()
	var a Answer
	if json.NewDecoder(resp.Body).Decode(&a) != nil || resp.StatusCode != http.StatusRequestTimeout || guard.count("http", "silent") != 1 {
		t.Errorf("%d %+v", resp.StatusCode, a)
	}
}
