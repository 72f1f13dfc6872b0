package console

import (
	"bytes"
	"encoding/json"
	"fmt"
	"net/http"
	"sync"
	"time"
)

// live sends changed rows of the network page to the browsers that are looking. Rows are made once a second for all of them, and only while
// somebody looks.
type live struct {
	mu      sync.Mutex
	viewers map[chan []byte]struct{}
	seen    map[string]int64 // version of a station's state as last sent
}

const (
	liveEvery    = time.Second
	liveAlive    = 20 * time.Second // a line without meaning, so that a dead connection is noticed
	liveDeadline = 10 * time.Second // a browser that takes nothing for so long is let go
	liveWaiting  = 8                // seconds of rows that a slow browser may be behind
	viewersMax   = 1000
)

// liveEvents is the stream that a page listens to: server-sent events, `station` with a row each.
func (c *Console) liveEvents(w http.ResponseWriter, r *http.Request) {
	ch, ok := c.live.join(c)
	if !ok {
		http.Error(w, "too many open pages; this one still works, without live rows", http.StatusServiceUnavailable)
		return
	}
	defer c.live.leave(ch)
	w.Header().Set("Content-Type", "text/event-stream")
	w.Header().Set("Cache-Control", "no-store")
	out := http.NewResponseController(w)
	send := func(b []byte) bool {
		_ = out.SetWriteDeadline(time.Now().Add(liveDeadline))
		if _, err := w.Write(b); err != nil {
			return false
		}
		return out.Flush() == nil
	}
	_ = out.SetReadDeadline(time.Time{})
	alive := time.NewTicker(liveAlive)
	defer alive.Stop()
	for ok := send([]byte("retry: 3000\n\n")); ok; {
		select {
		case <-r.Context().Done():
			return
		case b, open := <-ch:
			ok = open && send(b)
		case <-alive.C:
			ok = send([]byte(": still here\n\n"))
		}
	}
}

func (l *live) join(c *Console) (chan []byte, bool) {
	l.mu.Lock()
	defer l.mu.Unlock()
	if len(l.viewers) >= viewersMax {
		return nil, false
	}
	ch := make(chan []byte, liveWaiting)
	if l.viewers == nil {
		l.viewers = map[chan []byte]struct{}{}
	}
	l.viewers[ch] = struct{}{}
	if len(l.viewers) == 1 {
		l.seen = c.versions()
		go c.tell()
	}
	return ch, true
}

func (l *live) leave(ch chan []byte) {
	l.mu.Lock()
	defer l.mu.Unlock()
	delete(l.viewers, ch)
}

func (c *Console) versions() map[string]int64 {
	c.mu.Lock()
	defer c.mu.Unlock()
	out := make(map[string]int64, len(c.states))
	for id, s := range c.states {
		out[id] = s.version
	}
	return out
}

// tell runs while anybody looks.
func (c *Console) tell() {
	tick := time.NewTicker(liveEvery)
	defer tick.Stop()
	for range tick.C {
		l := &c.live
		l.mu.Lock()
		if len(l.viewers) == 0 {
			l.mu.Unlock()
			return
		}
		seen := l.seen
		l.mu.Unlock()
		b := c.changedRows(seen)
		if len(b) == 0 {
			continue
		}
		l.mu.Lock()
		for ch := range l.viewers {
			select {
			case ch <- b:
			default: // too far behind: it is let go and comes again by itself
				delete(l.viewers, ch)
				close(ch)
			}
		}
		l.mu.Unlock()
	}
}

// changedRows makes the events of all stations that changed since they were last seen.
func (c *Console) changedRows(seen map[string]int64) []byte {
	now, site := c.now(), c.config.Site()
	var rows []networkRow
	c.mu.Lock()
	for i := range site.Stations {
		st := &site.Stations[i]
		if s := c.states[st.ID]; s != nil && s.version != seen[st.ID] {
			seen[st.ID] = s.version
			rows = append(rows, c.rowState(st, s, now))
		}
	}
	c.mu.Unlock()
	var b bytes.Buffer
	for _, row := range rows {
		var html bytes.Buffer
		if err := c.pages.ExecuteTemplate(&html, "row", row); err != nil {
			continue
		}
		data, err := json.Marshal(map[string]string{"id": row.ID, "last": row.Last, "html": html.String()})
		if err == nil {
			fmt.Fprintf(&b, "event: station\ndata: %s\n\n", data)
		}
	}
	return b.Bytes()
}
