package engine

import (
	"math"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// Settle works out verdicts, reasons and restored values of the judged rows from their tests, from the episodes that
// reach them and from the plan's notes. It may be called again when episodes have changed; what it writes depends on its arguments alone.
func Settle(plan *Plan, j *Judged, episodes []fault.Episode) {
	for i := range plan.series {
		settleTests(plan, j, i)
	}
	first := j.Day * minute.PerDay
	// What restores a value comes first: it lifts what the tests said of the measured one, never what another fault says.
	for _, restoring := range [...]bool{true, false} {
		for k := range episodes {
			e := &episodes[k]
			from, to := e.From-first, e.To-first
			if to <= 0 || from >= int64(j.Rows) {
				continue
			}
			lo, hi := int(max(from, 0)), int(min(to, int64(j.Rows)))
			for i := range plan.series {
				settleEpisode(plan, j, i, e, lo, hi, restoring)
			}
		}
	}
	settleNotes(plan, j)
	plan.chooseBest(j)
}

// settleTests gives the verdict that the tests alone come to.
func settleTests(plan *Plan, j *Judged, i int) {
	s := &j.Series[i]
	n := j.Rows
	copy(s.Value[:n], s.Measured[:n])
	if s.soundU95 != nil {
		copy(s.U95[:n], s.soundU95[:n])
	}
	if s.offset != nil {
		s.withoutOffset(n)
	}
	clear(s.Faults[:n])
	clear(s.Restored[:n])
	clear(s.Notes[:n])
	for r, missed := range s.Missed[:n] {
		switch {
		case missed == 0:
			s.Verdict[r] = rules.Accepted
		case missed.Has(rules.Missing):
			s.Verdict[r] = rules.Absent
		default:
			s.Verdict[r] = testsEffect(s, plan.series[i].zeroAllowance, j.ApparentZenithDeg[r], r).Verdict()
		}
	}
}

// testsEffect is what the missed tests of a row come to. Closure near the horizon is only said; so is a night value
// off nothing, as long as the zero offset that the class may have explains it.
func testsEffect(s *Series, zeroAllowance, apparentZenithDeg float64, r int) rules.Effect {
	missed := s.Missed[r]
	const special = rules.TestSet(1<<rules.Closure | 1<<rules.NightZero)
	effect := rules.TestsEffect(missed &^ special)
	if missed.Has(rules.Closure) {
		effect = max(effect, rules.ClosureEffect(apparentZenithDeg))
	}
	if missed.Has(rules.NightZero) {
		if math.Abs(s.Measured[r]) > zeroAllowance {
			effect = max(effect, rules.TestEffect(rules.NightZero))
		} else {
			effect = max(effect, rules.Report)
		}
	}
	return effect
}

// settleEpisode applies one episode to one series over rows [lo, hi) where the kind reaches it: either to the rows that it can
// restore or to the others.
func settleEpisode(plan *Plan, j *Judged, i int, e *fault.Episode, lo, hi int, restoring bool) {
	s := &j.Series[i]
	if !fault.Concerns(e, plan.setup, s.Instrument, s.Quantity) {
		return
	}
	for r := lo; r < hi; r++ {
		if !fault.Reaches(e, s.Quantity, s.Measured[r], j.ApparentZenithDeg[r], j.AzimuthDeg[r]) {
			continue
		}
		restored, ok := math.NaN(), false
		if e.Severity == rules.Act && s.Verdict[r] != rules.Absent {
			restored, ok = fault.Restore(e, s.Quantity, plan.setup, func(q rules.Quantity) float64 { return measuredOf(plan, j, q, r) })
		}
		if ok != restoring {
			continue
		}
		s.Faults[r] |= e.Kind.Of()
		switch effect := episodeEffect(e, s).Verdict(); {
		case ok:
			s.Value[r], s.Restored[r] = RoundIrradiance(restored), true
			s.U95[r] = plan.restoredU95(j, i, r, e, s.Value[r])
			s.Verdict[r] = rules.RestoredEffect.Verdict()
		case s.Verdict[r] != rules.Absent && effect > s.Verdict[r]:
			s.Verdict[r] = effect
		}
	}
}

// episodeEffect is what an episode does to a series' minutes that it reaches. Longwave moves slowly: under a wrong clock it is seldom far off, and
// questioned at most. So is the dome beside the one that snow was told of.
func episodeEffect(e *fault.Episode, s *Series) rules.Effect {
	effect := rules.FaultEffect(e.Kind, e.Severity)
	if e.Kind == rules.ClockShift && s.Quantity.Longwave() || e.Kind == rules.DomeSnow && e.Instrument != s.Instrument {
		return min(effect, rules.Question)
	}
	return effect
}

func measuredOf(plan *Plan, j *Judged, q rules.Quantity, r int) float64 {
	if s := plan.primarySeries(j, q); s != nil {
		return s.Measured[r]
	}
	return math.NaN()
}
