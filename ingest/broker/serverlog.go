package broker

import (
	"context"
	"fmt"
	"log/slog"
	"regexp"
	"strings"
	"sync"
	"time"
)

// serverLog passes on what the server says, from warnings upwards: its notices at start are no news. One that says the same of a
// thousand clients is heard once a minute; the access that is told of them counts each.
type serverLog struct {
	log    *slog.Logger
	access *Access // told of clients that were turned away; optional
	mu     sync.Mutex
	last   string
	heard  map[string]heard // by the form of what was said
	gone   chan struct{}    // closed when the server says that it cannot go on
}

type heard struct {
	at   time.Time
	kept int // not passed on since
}

// sayAgainAfter is how long the same form of words is not passed on again.
const sayAgainAfter = time.Minute

var particular = regexp.MustCompile(`"(\\.|[^"\\])*"|(User|Nkey) |[0-9a-f.:\[\]]*[0-9][0-9a-f.:\[\]]*`)

func (l *serverLog) Noticef(string, ...any) {}
func (l *serverLog) Tracef(string, ...any)  {}

// Debugf is heard for one thing only: that a client connected and said nothing is no more than that to the server. It says so at
// most once a second.
func (l *serverLog) Debugf(_ string, v ...any) {
	for _, x := range v {
		if text, ok := x.(string); ok && l.access != nil && strings.HasPrefix(text, "Authentication Timeout") {
			l.access.Refused("nats", RefusedSilent)
		}
	}
}

func (l *serverLog) Warnf(format string, v ...any) { l.write(slog.LevelWarn, format, v) }

func (l *serverLog) Errorf(format string, v ...any) { l.keep(format, v) }

// Fatalf would end the process by the server's own logger. Here the start is refused by the caller instead.
func (l *serverLog) Fatalf(format string, v ...any) {
	l.keep(format, v)
	l.mu.Lock()
	defer l.mu.Unlock()
	select {
	case <-l.gone:
	default:
		close(l.gone)
	}
}

func (l *serverLog) keep(format string, v []any) {
	text := fmt.Sprintf(format, v...)
	l.mu.Lock()
	l.last = text
	l.mu.Unlock()
	if reason := violation(text); reason != "" && l.access != nil {
		l.access.Refused("nats", reason)
	}
	l.write(slog.LevelError, format, v)
}

// write passes on the first of a form at once, and the others as a number with the next that is passed on.
func (l *serverLog) write(level slog.Level, format string, v []any) {
	if l.log == nil {
		return
	}
	text, now := fmt.Sprintf(format, v...), time.Now()
	form := particular.ReplaceAllString(text, "") // a client's address, number and name come in the text
	l.mu.Lock()
	if l.heard == nil {
		l.heard = map[string]heard{}
	}
	h, known := l.heard[form]
	if known && now.Sub(h.at) < sayAgainAfter {
		h.kept++
		l.heard[form] = h
		l.mu.Unlock()
		return
	}
	l.heard[form] = heard{at: now}
	l.mu.Unlock()
	args := []any{"says", text}
	if h.kept > 0 {
		args = append(args, "more_of_this_kind", h.kept)
	}
	l.log.Log(context.Background(), level, "broker", args...)
}

func (l *serverLog) lastError() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.last
}
