package worker

import (
	"context"
	"maps"
	"reflect"
	"slices"
	"time"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/store"
)

// prepared is what of a station went into a commit, to be noted once it has come off.
type prepared struct {
	episodes []fault.Episode
	sealed   []int64
	notes    int
}

// prepare brings the station up to date with all its readings and adds to the commit what the archive does not have.
func (s *station) prepare(ctx context.Context, now time.Time, c *Commit) (*prepared, error) {
	if err := s.foldLate(); err != nil {
		return nil, err
	}
	if err := s.payAlone(ctx, now); err != nil {
		return nil, err
	}
	pr := &prepared{episodes: s.episodes()}
	s.oweTouched(pr.episodes)
	s.oweSeals(minute.Stamp(now.UnixMicro()))
	c.Owed = append(c.Owed, s.owed()...)
	c.Notes = append(c.Notes, s.newNotes...)
	pr.notes = len(s.newNotes)
	for _, day := range slices.Sorted(maps.Keys(s.paid)) {
		c.DayReasons = append(c.DayReasons, store.DayReason{Station: s.id, Day: day, Reason: s.paid[day]})
	}
	for _, day := range slices.Sorted(maps.Keys(s.raw)) {
		c.Raw = append(c.Raw, RawPart{Day: day, Batch: s.raw[day]})
	}
	for _, day := range slices.Sorted(maps.Keys(s.judged)) {
		sealed := isComplete(day, minute.Stamp(now.UnixMicro()))
		if sealed {
			pr.sealed = append(pr.sealed, day)
		}
		s.addDay(c, s.planFor(day), s.judged[day], pr.episodes, sealed)
	}
	if s.current != nil && s.current.changed {
		s.addDay(c, s.current.plan, s.current.judged, pr.episodes, false)
	}
	if !sameEpisodes(s.committed, pr.episodes) {
		c.Faults = append(c.Faults, StationFaults{Station: s.id, Episodes: pr.episodes})
	}
	for _, day := range slices.Sorted(maps.Keys(s.unsaved)) {
		c.Summaries = append(c.Summaries, s.summaries[day])
	}
	return pr, nil
}

func sameEpisodes(a, b []fault.Episode) bool { return slices.EqualFunc(a, b, sameEpisode) }

func sameEpisode(a, b fault.Episode) bool {
	if !slices.Equal(a.Also, b.Also) || !slices.Equal(a.Evidence, b.Evidence) {
		return false
	}
	a.Also, a.Evidence, b.Also, b.Evidence = nil, nil, nil, nil
	return reflect.DeepEqual(a, b)
}

func (s *station) addDay(c *Commit, plan *engine.Plan, j *engine.Judged, episodes []fault.Episode, sealed bool) {
	if j == nil || j.Rows == 0 {
		return
	}
	if s.guard(func() { engine.Settle(plan, j, s.reaching(episodes, j.Day)) }) {
		c.Days = append(c.Days, Day{Judged: j, Sealed: sealed})
	}
}

// settled notes that a commit has come off.
func (s *station) settled(ctx context.Context, pr *prepared) {
	clear(s.raw)
	for day, j := range s.judged {
		s.w.spares.takeJudged(s.planFor(day), j)
	}
	clear(s.judged)
	clear(s.unsaved)
	clear(s.paid)
	s.newNotes = s.newNotes[pr.notes:]
	for _, day := range pr.sealed {
		delete(s.sealing, day)
	}
	if s.current != nil {
		s.current.changed = false
	}
	s.tell(ctx)
	s.committed, s.told = pr.episodes, false
	s.trim()
}

// waits says whether the station has something that a commit should carry besides readings.
func (s *station) waits(now minute.Stamp) bool {
	if s.told || len(s.unsaved)+len(s.newNotes)+len(s.paid) > 0 || s.current != nil && s.current.changed {
		return true
	}
	for day := range s.sealing {
		if isComplete(day, now) {
			return true
		}
	}
	return s.compactable(now) != ""
}
