package notify

import (
	"fmt"
	"maps"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/fault"
)

// Summary says how all stations stand: what is open, what ended within a day, what is suspected.
func (n *Notifier) Summary() string {
	now := n.cfg.Now()
	var open, ended, suspected []string
	quiet := 0
	n.mu.Lock()
	for _, station := range slices.Sorted(maps.Keys(n.stations)) {
		k := n.stations[station]
		before := len(open)
		for _, id := range slices.Sorted(maps.Keys(k.episodes)) {
			e := k.episodes[id]
			switch {
			case e.To == fault.Open:
				open = append(open, fmt.Sprintf("%s %s: %s since %s. %s", station, e.Instrument, e.Kind.Entry().Title, minuteText(e.From), e.Advice))
			case now.Sub(time.Unix(60*e.To, 0)) < oldNews:
				ended = append(ended, fmt.Sprintf("%s %s: %s, %s to %s", station, e.Instrument, e.Kind.Entry().Title, minuteText(e.From), minuteText(e.To)))
			}
		}
		for _, e := range k.suspected {
			suspected = append(suspected, fmt.Sprintf("%s %s: %s since %s", station, e.Instrument, e.Kind.Entry().Title, minuteText(e.From)))
		}
		if len(open) == before {
			quiet++
		}
	}
	total := len(n.stations)
	n.mu.Unlock()
	var b strings.Builder
	fmt.Fprintf(&b, "%d of %d stations have no open fault.\n", quiet, total)
	for _, part := range []struct {
		title string
		lines []string
	}{{"Open", open}, {"Ended since yesterday", ended}, {"Suspected", suspected}} {
		if len(part.lines) > 0 {
			fmt.Fprintf(&b, "\n%s:\n- %s\n", part.title, strings.Join(part.lines, "\n- "))
		}
	}
	return b.String()
}

func minuteText(m int64) string { return time.Unix(60*m, 0).UTC().Format("2006-01-02 15:04Z") }
