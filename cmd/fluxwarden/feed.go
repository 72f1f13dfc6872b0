package main

import (
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"flag"
	"fmt"
	"io"
	"log/slog"
	"net/http"
	"net/url"
	"os"
	"os/signal"
	"path/filepath"
	"strings"
	"sync"
	"syscall"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/field"
	"fluxwarden/ingest/gate"
)

const feedUsage = `example: fluxwarden feed --site site.yaml --station northmoor --to https://hub.example:9471 --credentials northmoor.secret

Follows the files that the site file names for a station (files: ...) and brings their lines to a daemon elsewhere, over NATS
(nats:// or tls://) or HTTP (http:// or https://). How far each file was taken is kept in --state.

`

// cmdFeed follows files and brings them to a remote daemon.
func cmdFeed(args []string) int {
	flags := flag.NewFlagSet("feed", flag.ContinueOnError)
	sitePath := flags.String("site", "", "the site `file`, for the layout of the files")
	station := flags.String("station", "", "the `station` whose files are followed")
	to := flags.String("to", "", "`url` of the daemon: nats://host:4222, tls://host:4222, http://host:port or https://host:port")
	credentials := flags.String("credentials", "", "`file` of the station's secret, made by fluxwarden credentials new --out; or the variable FLUXWARDEN_SECRET, NAME:PASSWORD")
	ca := flags.String("ca", "", "`file` of the authority that signed the daemon's certificate; without it those that the system knows")
	state := flags.String("state", "fluxwarden-feed", "`directory` that keeps how far each file was taken")
	once := flags.Bool("once", false, "take what is there now, and stop")
	flags.Usage = func() { fmt.Fprint(os.Stderr, feedUsage); flags.PrintDefaults() }
	if err := flags.Parse(args); err != nil {
		return parseCode(err)
	}
	if *sitePath == "" || *station == "" || *to == "" || flags.NArg() > 0 {
		return complain(exitUsage, errors.New("feed: name --site, --station and --to"))
	}
	site, _, err := loadSite(*sitePath)
	if err != nil {
		return complain(exitUsage, err)
	}
	st := site.Station(*station)
	if st == nil || len(st.Files) == 0 {
		return complain(exitUsage, fmt.Errorf("feed: the site file has no files of a station %q", *station))
	}
	door, closeDoor, err := openRemote(*to, *credentials, *ca)
	if err != nil {
		return complain(exitUsage, err)
	}
	defer closeDoor()
	if err := os.MkdirAll(*state, 0o750); err != nil {
		return complain(exitUsage, fmt.Errorf("feed: state: %w", err))
	}
	ctx, stop := signal.NotifyContext(context.Background(), os.Interrupt, syscall.SIGTERM)
	defer stop()
	log := slog.New(slog.NewTextHandler(os.Stderr, nil))
	var followers []*field.Follower
	for i := range st.Files {
		followers = append(followers, field.NewFollower(field.FileSettings{Station: st.ID, Layout: &st.Files[i], Door: door, Log: log,
			Places: filepath.Join(*state, fmt.Sprintf("%s.files-%d.json", st.ID, i+1))}))
	}
	if *once {
		return feedOnce(ctx, followers)
	}
	var wg sync.WaitGroup
	for _, f := range followers {
		wg.Go(func() { f.Run(ctx) })
	}
	wg.Wait()
	return exitOK
}

func feedOnce(ctx context.Context, followers []*field.Follower) int {
	var taken, wrong int64
	var bad error
	for _, f := range followers {
		bad = errors.Join(bad, f.Look(ctx))
		f.Close()
		taken, wrong = taken+f.Taken, wrong+f.Wrong
	}
	fmt.Printf("%d readings are on disk there, %d lines or readings were refused\n", taken, wrong)
	if bad != nil {
		return complain(exitProblem, bad)
	}
	if wrong > 0 {
		return exitProblem
	}
	return exitOK
}

// openRemote gives the door of a daemon elsewhere.
func openRemote(to, credentials, ca string) (field.Door, func(), error) {
	u, err := url.Parse(to)
	if err != nil || u.Host == "" {
		return nil, nil, fmt.Errorf("feed: --to %q: write nats://host:4222 or https://host:port", to)
	}
	tlsConfig, err := broker.ClientTLS(ca, "", "")
	if err != nil {
		return nil, nil, err
	}
	switch u.Scheme {
	case "nats", "tls":
		s := broker.ConnectSettings{URL: to, Credentials: credentials, Name: "fluxwarden feed"}
		if ca != "" || u.Scheme == "tls" {
			s.TLS = tlsConfig
		}
		b, err := broker.Connect(s)
		if err != nil {
			return nil, nil, err
		}
		return natsDoor{b}, b.Close, nil
	case "http", "https":
		name, secret, _ := strings.Cut(os.Getenv("FLUXWARDEN_SECRET"), ":")
		if credentials != "" {
			s, err := broker.ReadSecret(credentials)
			if err != nil {
				return nil, nil, err
			}
			name, secret = s.Name, s.Password
		}
		client := &http.Client{Timeout: time.Minute, Transport: &http.Transport{TLSClientConfig: tlsConfig, Proxy: http.ProxyFromEnvironment}}
		return httpDoor{strings.TrimSuffix(to, "/"), name, secret, client}, client.CloseIdleConnections, nil
	}
	return nil, nil, fmt.Errorf("feed: --to %q: the scheme is nats, tls, http or https", to)
}

// natsDoor brings payloads as NATS requests.
type natsDoor struct{ b *broker.Broker }

const feedAnswerWait = 30 * time.Second

// Take implements field.Door.
func (d natsDoor) Take(ctx context.Context, station string, payload []byte) (field.Answer, error) {
	ctx, cancel := context.WithTimeout(ctx, feedAnswerWait)
	defer cancel()
	m, err := d.b.Conn.RequestWithContext(ctx, gate.SubjectPrefix+station, payload)
	if err != nil {
		return field.Answer{}, err
	}
	return parseAnswer(m.Data)
}

func parseAnswer(text []byte) (field.Answer, error) {
	var a field.Answer
	if err := json.Unmarshal(text, &a); err != nil {
		return a, fmt.Errorf("answer %.60q: %w", text, err)
	}
	return a, nil
}

// httpDoor brings payloads by HTTP.
type httpDoor struct {
	base, name, secret string
	client             *http.Client
}

// Take implements field.Door. A credential that is refused is no refusal of the readings: it is tried again until it is mended.
func (d httpDoor) Take(ctx context.Context, station string, payload []byte) (field.Answer, error) {
	req, err := http.NewRequestWithContext(ctx, http.MethodPost, d.base+field.HTTPPath+station, bytes.NewReader(payload))
	if err != nil {
		return field.Answer{}, err
	}
	req.Header.Set("Content-Type", "application/json")
	if d.name != "" {
		req.SetBasicAuth(d.name, d.secret)
	}
	resp, err := d.client.Do(req)
	if err != nil {
		return field.Answer{}, err
	}
	defer resp.Body.Close()
	text, err := io.ReadAll(io.LimitReader(resp.Body, 1<<20))
	if err != nil {
		return field.Answer{}, err
	}
	switch resp.StatusCode {
	case http.StatusOK, http.StatusUnprocessableEntity, http.StatusTooManyRequests, http.StatusServiceUnavailable:
		return parseAnswer(text)
	}
	return field.Answer{}, fmt.Errorf("%s: %s: %.200s", d.base, resp.Status, text)
}
