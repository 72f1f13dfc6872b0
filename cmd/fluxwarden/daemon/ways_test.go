package daemon

import (
	"context"
	"errors"
	"io"
	"net/http"
	"path/filepath"
	"strings"
	"testing"
	"time"

	"fluxwarden/ingest/broker"
)

func TestStrangersAreKeptOut(t *testing.T) {
	for what, change := range map[string]func(*Settings){
		"broker: listen": func(s *Settings) { s.Broker.Listen = "0.0.0.0:0" },
		"ways: http":     func(s *Settings) { s.Ways.HTTP = ":0" },
		"anonymous":      func(s *Settings) { s.Access.Anonymous = "always" },
		"tls":            func(s *Settings) { s.TLS.Certificate = "x" },
		"credentials":    func(s *Settings) { s.Access.Credentials = "not-there" },
	} {
		c, _ := testConfig(t)
		change(&c.Settings)
		d, err := Start(context.Background(), c)
		var unusable *Unusable
		if err == nil || !errors.As(err, &unusable) || !strings.Contains(err.Error(), what) {
			t.Errorf("%s: %v", what, err)
		}
		if d != nil {
			_ = d.Stop()
		}
	}
}

// A reading by HTTP is judged as any other; a credential that is revoked while the daemon runs is refused; no secret is in /metrics.
func TestReadingsByHTTP(t *testing.T) {
	c, _ := testConfig(t)
	book := broker.Book{}
	secret, err := book.New(broker.Credential{Role: broker.RoleStation, Station: "northmoor"}, false, time.Now())
	if err != nil {
		t.Fatal(err)
	}
	c.Settings.Access.Credentials, c.Settings.Ways.HTTP = filepath.Join(t.TempDir(), "credentials.yaml"), "127.0.0.1:0"
	if err := book.Write(c.Settings.Access.Credentials); err != nil {
		t.Fatal(err)
	}
	d, err := Start(context.Background(), c)
	if err != nil {
		t.Fatal(err)
	}
	defer d.Stop()
	eventually(t, "ready", func() bool { code, _ := get(t, d, "/-/ready"); return code == http.StatusOK })
	post := func(station string) (int, string) {
		req, _ := http.NewRequest("POST", "http://"+d.HTTPAddress()+"/v1/readings/"+station, strings.NewReader(`{"t":"2026-06-21T11:59:00Z","x":{"ghi":802}}`))
		req.SetBasicAuth(secret.Name, secret.Password)
		resp, err := http.DefaultClient.Do(req)
		if err != nil {
			t.Fatal(err)
		}
		defer resp.Body.Close()
		body, _ := io.ReadAll(resp.Body)
		return resp.StatusCode, strings.TrimSpace(string(body))
	}
	if code, body := post("northmoor"); code != http.StatusOK || body != `{"ok":true,"n":1}` {
		t.Fatal(code, body)
	}
	if code, body := post("southmoor"); code != http.StatusForbidden {
		t.Error(code, body)
	}
	if err := book.Revoke(secret.Name, time.Now()); err != nil {
		t.Fatal(err)
	}
	if err := book.Write(c.Settings.Access.Credentials); err != nil {
		t.Fatal(err)
	}
	eventually(t, "the revoked credential is refused", func() bool { code, _ := post("northmoor"); return code == http.StatusUnauthorized })
	_, text := get(t, d, "/metrics")
	for _, want := range []string{`fluxwarden_access_refused_total{reason="subject",way="http"} 1`, `fluxwarden_gate_readings_acked_total`} {
		if !strings.Contains(text, want) {
			t.Errorf("no %s in metrics", want)
		}
	}
	if strings.Contains(text, secret.Password) {
		t.Error("a secret is in /metrics")
	}
}
