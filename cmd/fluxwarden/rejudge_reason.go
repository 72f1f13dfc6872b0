package main

import (
	"fmt"
	"slices"
	"strings"
	"sync"
	"time"

	"fluxwarden/rules"
	"fluxwarden/store"
)

// A reasonBook tells by the rule sets that the archive keeps why rows change.
type reasonBook struct {
	archive *store.Archive
	site    *rules.Site // today's; nil where two kept ones are compared

	mu    sync.Mutex
	known map[string]*rules.Site // by digest; nil where it cannot be had
}

// why says what is different in today's rules of a station from those of the digests.
func (b *reasonBook) why(st *rules.Station, old []string) string {
	var list []string
	for _, digest := range old {
		if digest == b.site.Digest {
			continue
		}
		reason := "new rules"
		if before := b.kept(digest); before != nil {
			reason = rulesChange(before.Station(st.ID), st)
		}
		if reason != "" && !slices.Contains(list, reason) {
			list = append(list, reason)
		}
	}
	if len(list) == 0 {
		return "" // the rules are the same: the store or the program tells
	}
	return strings.Join(list, "; ")
}

// kept gives a rule set that the archive keeps, nil if it does not.
func (b *reasonBook) kept(digest string) *rules.Site {
	b.mu.Lock()
	defer b.mu.Unlock()
	if s, ok := b.known[digest]; ok {
		return s
	}
	if b.known == nil {
		b.known = map[string]*rules.Site{}
	}
	var site *rules.Site
	if text, err := b.archive.Rules(digest); err == nil {
		if s, err := rules.Parse(digest, text); err == nil && s.Digest == digest {
			site = s
		}
	}
	b.known[digest] = site
	return site
}

// rulesChange says in a few words what is different between two rule sets of a station; empty if nothing is that can change a row.
func rulesChange(before, after *rules.Station) string {
	switch {
	case before == nil:
		return "new rules: the station was not in them before"
	case after == nil:
		return "new rules: the station is no longer in them"
	case before.Digest == after.Digest:
		return ""
	}
	var list []string
	calibrated := false
	for i := range after.Instruments {
		now := &after.Instruments[i]
		was := instrumentOf(before, now.ID)
		if was == nil {
			list = append(list, "instrument "+now.ID+" is new")
			continue
		}
		if from, other := calibrationChange(was, now); other {
			calibrated = true
			list = append(list, fmt.Sprintf("new calibration of %s from %s", now.ID, from.Format(time.DateOnly)))
		}
		if bare(was) != bare(now) {
			list = append(list, "instrument "+now.ID)
		}
	}
	for i := range before.Instruments {
		if instrumentOf(after, before.Instruments[i].ID) == nil {
			list = append(list, "instrument "+before.Instruments[i].ID+" is gone")
		}
	}
	for _, part := range []struct {
		name     string
		was, now any
	}{
		{"position", []float64{before.LatitudeDeg, before.LongitudeDeg, before.ElevationM}, []float64{after.LatitudeDeg, after.LongitudeDeg, after.ElevationM}},
		{"time", before.Time, after.Time}, {"horizon", before.Horizon, after.Horizon}, {"weather", before.Weather, after.Weather},
		{"sky", before.Sky, after.Sky}, {"limits", before.Limits, after.Limits},
	} {
		if fmt.Sprint(part.was) != fmt.Sprint(part.now) {
			list = append(list, part.name)
		}
	}
	if calibrated && !slices.ContainsFunc(list, func(s string) bool { return !strings.HasPrefix(s, "new calibration") }) {
		return strings.Join(list, ", ")
	}
	if len(list) == 0 {
		return "new rules"
	}
	return "new rules: " + strings.Join(list, ", ")
}

func instrumentOf(st *rules.Station, id string) *rules.Instrument {
	for i := range st.Instruments {
		if st.Instruments[i].ID == id {
			return &st.Instruments[i]
		}
	}
	return nil
}

// bare is an instrument without its calibrations, as text to compare.
func bare(in *rules.Instrument) string {
	x := *in
	x.Calibrations, x.Line = nil, 0
	return fmt.Sprintf("%+v", x)
}

// calibrationChange gives the first moment from which two calibration histories differ.
func calibrationChange(was, now *rules.Instrument) (from time.Time, other bool) {
	text := func(c rules.Calibration) string { c.Line = 0; return fmt.Sprintf("%+v", c) }
	for i := 0; i < max(len(was.Calibrations), len(now.Calibrations)); i++ {
		switch {
		case i >= len(was.Calibrations):
			return now.Calibrations[i].From, true
		case i >= len(now.Calibrations):
			return was.Calibrations[i].From, true
		}
		a, b := was.Calibrations[i], now.Calibrations[i]
		if text(a) == text(b) {
			continue
		}
		end := b.To
		if a.To.Before(b.To) && !a.To.IsZero() || b.To.IsZero() {
			end = a.To
		}
		a.To, b.To = time.Time{}, time.Time{}
		if text(a) == text(b) { // only its end is another
			return end, true
		}
		if b.From.Before(a.From) {
			return b.From, true
		}
		return a.From, true
	}
	return time.Time{}, false
}
