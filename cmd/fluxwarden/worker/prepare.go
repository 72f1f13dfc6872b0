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
)

// prepared is what of a station went into a commit, to be noted once it has come off.
type prepared struct {
	episodes []fault.Episode
	sealed   []int64
}

// prepare brings the station up to date with all its readings and adds to the commit what the archive does not have.
func (s *station) prepare(ctx context.Context, now time.Time, c *Commit) (*prepared, error) {
	if !s.w.cfg.Faulty.NoJudgingAgain {
		if err := s.judgeAgain(ctx); err != nil {
			return nil, err
		}
	} else if _, err := s.foldLate(); err != nil {
		return nil, err
	}
	pr := &prepared{episodes: s.episodes()}
	if err := s.settleBack(ctx, pr.episodes); err != nil {
		return nil, err
	}
	if err := s.judgeForSeal(ctx, minute.Stamp(now.UnixMicro())); err != nil {
		return nil, err
	}
	for _, day := range slices.Sorted(maps.Keys(s.raw)) {
		c.Raw = append(c.Raw, RawPart{Day: day, Batch: s.raw[day]})
	}
	for _, day := range slices.Sorted(maps.Keys(s.judged)) {
		sealed := isComplete(day, minute.Stamp(now.UnixMicro()))
		if sealed {
			pr.sealed = append(pr.sealed, day)
		}
		s.addDay(c, s.w.cfg.Rules.PlanFor(s.id, day), s.judged[day], pr.episodes, sealed)
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

// judgeForSeal judges the days whose time has come once more from all that is kept of them, so that they can be written
// for good.
func (s *station) judgeForSeal(ctx context.Context, now minute.Stamp) error {
	for _, day := range slices.Sorted(maps.Keys(s.sealing)) {
		if !isComplete(day, now) || s.judged[day] != nil {
			continue
		}
		if _, err := s.closedDayAgain(ctx, day); err != nil {
			return err
		}
		if s.judged[day] == nil { // the core cannot bear it: there is nothing to seal
			delete(s.sealing, day)
		}
	}
	return nil
}

// settled notes that a commit has come off.
func (s *station) settled(ctx context.Context, pr *prepared) {
	clear(s.raw)
	for day, j := range s.judged {
		s.w.spares.takeJudged(s.w.cfg.Rules.PlanFor(s.id, day), j)
	}
	clear(s.judged)
	clear(s.unsaved)
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
	if s.told || len(s.unsaved) > 0 || s.current != nil && s.current.changed {
		return true
	}
	for day := range s.sealing {
		if isComplete(day, now) {
			return true
		}
	}
	return s.compactable(now) != ""
}
