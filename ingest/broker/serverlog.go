package broker

import (
	"context"
	"fmt"
	"log/slog"
	"sync"
)

// serverLog passes on what the server says, from warnings upwards: its notices at start are no news.
type serverLog struct {
	log  *slog.Logger
	mu   sync.Mutex
	last string
	gone chan struct{} // closed when the server says that it cannot go on
}

func (l *serverLog) Noticef(string, ...any) {}
func (l *serverLog) Debugf(string, ...any)  {}
func (l *serverLog) Tracef(string, ...any)  {}

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
	l.mu.Lock()
	l.last = fmt.Sprintf(format, v...)
	l.mu.Unlock()
	l.write(slog.LevelError, format, v)
}

func (l *serverLog) write(level slog.Level, format string, v []any) {
	if l.log != nil {
		l.log.Log(context.Background(), level, "broker", "says", fmt.Sprintf(format, v...))
	}
}

func (l *serverLog) lastError() string {
	l.mu.Lock()
	defer l.mu.Unlock()
	return l.last
}
