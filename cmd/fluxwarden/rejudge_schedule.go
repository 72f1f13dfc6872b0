package main

import (
	"fmt"
	"math"
	"os"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/store"
)

// keepSchedule lets today's rules hold for the days that were judged by them, so that a daemon which judges one of these days again, for
// late readings, does not go back to the rules of then.
func (r *rejudging) keepSchedule(oneStation bool) error {
	old, err := r.archive.Schedule()
	if err != nil || len(old) == 0 {
		return err // no daemon has worked here, or the first to start will let its site file hold for all days
	}
	if !slices.ContainsFunc(old, func(l store.RulesFrom) bool { return l.Digest != r.site.Digest }) {
		return nil
	}
	if oneStation || r.to != math.MaxInt32 {
		fmt.Fprintln(os.Stderr, "a daemon that judges one of these days again, for late readings, uses the rules that held on that day; "+
			"to let these rules hold for the past too, rejudge all stations without --to")
		return nil
	}
	list := scheduleFrom(old, r.from, r.site.Digest)
	if slices.Equal(list, old) {
		return nil
	}
	text, err := os.ReadFile(r.siteFile)
	if err == nil {
		err = r.archive.KeepRules(r.site.Digest, text)
	}
	if err != nil {
		return err
	}
	return r.archive.KeepSchedule(list)
}

// scheduleFrom is a schedule in which a rule set holds from the first day judged on.
func scheduleFrom(old []store.RulesFrom, from int64, digest string) []store.RulesFrom {
	if from == math.MinInt32 {
		return []store.RulesFrom{{From: old[0].From, Digest: digest}}
	}
	day := time.Unix(86400*(from-engine.HindsightDays), 0).UTC().Format(time.DateOnly)
	var list []store.RulesFrom
	for _, l := range old {
		if l.From < day {
			list = append(list, l)
		}
	}
	if n := len(list); n == 0 {
		// The first entry holds for the days before it too: they keep what held then.
		list = append(list, store.RulesFrom{From: "1970-01-01", Digest: old[0].Digest})
	} else if list[n-1].Digest == digest {
		return list
	}
	return append(list, store.RulesFrom{From: day, Digest: digest})
}
