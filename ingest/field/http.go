package field

import (
	"context"
	"encoding/json"
	"errors"
	"io"
	"log/slog"
	"net"
	"net/http"
	"strconv"
	"strings"
	"time"

	"fluxwarden/ingest/broker"
	"fluxwarden/ingest/wire"
)

// Limits of one HTTP request and of all.
const (
	httpHeaderWait   = 10 * time.Second
	httpReadWait     = 60 * time.Second // for a payload of 1 MiB over a slow radio link: 140 kbit/s
	httpAnswerWait   = 20 * time.Second // for the gate
	httpIdleWait     = 2 * time.Minute
	httpHeaderBytes  = 16 << 10
	httpAtOnceMax    = 512 // payloads in hand; more are asked to come again
	httpRetrySeconds = 5
)

// HTTPPath begins the path of a station's readings.
const HTTPPath = "/v1/readings/"

// NewHTTPServer serves POST /v1/readings/STATION: the same JSON as over NATS, answered as the gate answers. The token is that of a
// credential, as HTTP basic authentication or as `Authorization: Bearer NAME:SECRET`.
func NewHTTPServer(door Door, guard Guard, log *slog.Logger) *http.Server {
	h := &httpWay{door: door, guard: guard, atOnce: make(chan struct{}, httpAtOnceMax)}
	mux := http.NewServeMux()
	mux.HandleFunc("POST "+HTTPPath+"{station}", h.post)
	return &http.Server{Handler: mux, ReadHeaderTimeout: httpHeaderWait, ReadTimeout: httpReadWait, WriteTimeout: httpReadWait + httpAnswerWait,
		IdleTimeout: httpIdleWait, MaxHeaderBytes: httpHeaderBytes, ErrorLog: slog.NewLogLogger(quiet{log.Handler()}, slog.LevelDebug)}
}

type httpWay struct {
	door   Door
	guard  Guard
	atOnce chan struct{}
}

func (h *httpWay) post(w http.ResponseWriter, r *http.Request) {
	station := r.PathValue("station")
	name, secret, shown := bearer(r)
	if !shown && r.Header.Get("Authorization") != "" {
		h.turnAway(w, http.StatusUnauthorized, broker.RefusedWrong, "Authorization is `Basic`, or `Bearer NAME:SECRET`")
		return
	}
	if reason := h.guard.MaySpeak(name, secret, station, remoteAddress(r)); reason != "" {
		status, detail := http.StatusUnauthorized, "show the credential that fluxwarden credentials new printed"
		if reason == broker.RefusedSubject {
			status, detail = http.StatusForbidden, "this credential is not for station "+strconv.QuoteToASCII(cut(station))
		}
		h.turnAway(w, status, reason, detail)
		return
	}
	select {
	case h.atOnce <- struct{}{}:
		defer func() { <-h.atOnce }()
	default:
		h.guard.Refused("http", broker.RefusedConnections)
		h.write(w, http.StatusServiceUnavailable, Answer{Retry: true, Reason: "busy"})
		return
	}
	payload, err := io.ReadAll(http.MaxBytesReader(w, r.Body, wire.PayloadBytesMax))
	var tooLarge *http.MaxBytesError
	var timeout net.Error
	switch {
	case errors.As(err, &tooLarge):
		h.turnAway(w, http.StatusRequestEntityTooLarge, broker.RefusedTooLarge, "a payload has at most "+strconv.Itoa(wire.PayloadBytesMax)+" bytes: send fewer readings at a time")
		return
	case errors.As(err, &timeout) && timeout.Timeout():
		h.turnAway(w, http.StatusRequestTimeout, broker.RefusedSilent, "the payload did not come within "+httpReadWait.String())
		return
	case err != nil:
		h.turnAway(w, http.StatusBadRequest, broker.RefusedProtocol, "the payload did not come whole")
		return
	}
	ctx, cancel := context.WithTimeout(r.Context(), httpAnswerWait)
	defer cancel()
	answer, err := h.door.Take(ctx, station, payload)
	if err != nil {
		answer = Answer{Retry: true, Reason: "broker_away"}
	}
	h.write(w, statusOf(answer), answer)
}

// statusOf says the same as the answer, for those that look no further.
func statusOf(a Answer) int {
	switch {
	case a.OK:
		return http.StatusOK
	case a.Retry && a.Reason == "rate_limited":
		return http.StatusTooManyRequests
	case a.Retry:
		return http.StatusServiceUnavailable
	}
	return http.StatusUnprocessableEntity
}

func (h *httpWay) turnAway(w http.ResponseWriter, status int, reason, detail string) {
	h.guard.Refused("http", reason)
	if status == http.StatusUnauthorized {
		w.Header().Set("WWW-Authenticate", `Basic realm="fluxwarden"`)
	}
	h.write(w, status, Answer{Refused: []Refused{{Index: wire.Whole, Reason: reason, Detail: detail}}})
}

func (h *httpWay) write(w http.ResponseWriter, status int, a Answer) {
	w.Header().Set("Content-Type", "application/json")
	if a.Retry {
		w.Header().Set("Retry-After", strconv.Itoa(httpRetrySeconds))
	}
	w.WriteHeader(status)
	_ = json.NewEncoder(w).Encode(a) // a sender that hears nothing sends again
}

// bearer is the name and secret that a request shows.
func bearer(r *http.Request) (name, secret string, ok bool) {
	if name, secret, ok = r.BasicAuth(); ok {
		return name, secret, true
	}
	token, ok := strings.CutPrefix(r.Header.Get("Authorization"), "Bearer ")
	if !ok {
		return "", "", false
	}
	return strings.Cut(strings.TrimSpace(token), ":")
}

func remoteAddress(r *http.Request) net.Addr {
	host, _, err := net.SplitHostPort(r.RemoteAddr)
	if err != nil {
		return nil
	}
	return &net.TCPAddr{IP: net.ParseIP(host)}
}

func cut(s string) string { return s[:min(len(s), 40)] }
