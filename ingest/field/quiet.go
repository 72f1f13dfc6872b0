package field

import (
	"context"
	"log/slog"
	"sync"
	"time"
)

// quiet passes nothing on: what the HTTP server says of single clients is counted, not logged.
type quiet struct{ slog.Handler }

// Enabled implements slog.Handler.
func (quiet) Enabled(context.Context, slog.Level) bool { return false }

// A once logs the first of each kind at once and the rest as a number, at most once a minute a kind.
type once struct {
	log  *slog.Logger
	mu   sync.Mutex
	kept map[string]*kept
}

type kept struct {
	at time.Time
	n  int
}

const (
	sayAgainAfter = time.Minute
	kindsMax      = 1000
)

// warn logs, unless the same kind was logged within the last minute.
func (o *once) warn(kind, text string, args ...any) {
	if o.log == nil {
		return
	}
	o.mu.Lock()
	if o.kept == nil || len(o.kept) > kindsMax {
		o.kept = map[string]*kept{}
	}
	k := o.kept[kind]
	if k != nil && time.Since(k.at) < sayAgainAfter {
		k.n++
		o.mu.Unlock()
		return
	}
	if k == nil {
		k = &kept{}
		o.kept[kind] = k
	}
	if k.n > 0 {
		args = append(args, "more_of_this_kind", k.n)
	}
	*k = kept{at: time.Now()}
	o.mu.Unlock()
	o.log.Warn(text, args...)
}
