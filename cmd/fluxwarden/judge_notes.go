package main

import (
	"math"
	"slices"
	"strings"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/store"
)

// withNotes is the plan with what the archive's people have said of the station.
func withNotes(a *store.Archive, plan *engine.Plan) (*engine.Plan, error) {
	notes, err := a.Notes(plan.Station.ID)
	if err != nil {
		return nil, err
	}
	return plan.WithNotes(notes), nil
}

// owedReason says why a station's days were to be judged once more; empty where none were.
func owedReason(owed *[]store.Owed, station string) string {
	var list []string
	for _, o := range *owed {
		if o.Station == station && !slices.Contains(list, o.Reason) {
			list = append(list, o.Reason)
		}
	}
	return strings.Join(list, "; ")
}

// stillOwed is what is owed after the station's days from the first on have been judged.
func stillOwed(owed []store.Owed, station string, first int64) []store.Owed {
	name := time.Unix(86400*first, 0).UTC().Format(time.DateOnly)
	var left []store.Owed
	for _, o := range owed {
		if o.Station == station {
			o.Days = slices.DeleteFunc(slices.Clone(o.Days), func(d string) bool { return d >= name })
		}
		if len(o.Days) > 0 {
			left = append(left, o)
		}
	}
	return left
}

// lastOwed is the last day owed to a station, so that a pass goes on at least so far.
func lastOwed(owed []store.Owed, station string) int64 {
	last := int64(math.MinInt64)
	for _, o := range owed {
		if o.Station != station {
			continue
		}
		for _, d := range o.Days {
			if t, err := time.Parse(time.DateOnly, d); err == nil {
				last = max(last, t.Unix()/86400)
			}
		}
	}
	return last
}
