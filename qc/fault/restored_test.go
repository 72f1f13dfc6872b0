package fault_test

import (
	"math"
	"testing"

	"fluxwarden/qc/engine"
	"fluxwarden/qc/minute"
	"fluxwarden/rules"
)

// TestRestoredValuesAreRight: what is given back from behind a fault is what a sound station would have said, and what the fault has spoilt and
// nothing gave back is not accepted.
func TestRestoredValuesAreRight(t *testing.T) {
	for _, c := range []struct {
		stand *stand
		trial
		leastRestored int     // minutes
		accepted      float64 // share of the spoilt values that are accepted, at most
	}{
		{&plain, trial{kind: rules.PolarityReversed, instrument: "G1", sunHour: 9, hours: day}, 400, 0.01},
		{&moor, trial{kind: rules.PolarityReversed, instrument: "D1", sunHour: 11, hours: day}, 400, 0.03},
		// An offset is let go with the last night that showed it: the day after that is taken for sound though it ends only in its evening.
		{&plain, trial{kind: rules.ZeroOffset, instrument: "G1", amount: -25, sunHour: 15, hours: 2 * day}, 1500, 0.2},
		{&moor, trial{kind: rules.ZeroOffset, instrument: "D1", amount: 22, sunHour: 18, hours: 2 * day}, 1500, 0.3},
		{&plain, trial{kind: rules.ChannelsSwapped, instrument: "G1", sunHour: 9, hours: day}, 400, 0.03},
		{&fjord, trial{kind: rules.ChannelsSwapped, instrument: "G1", sunHour: 9, hours: day}, 400, 0.2},
	} {
		t.Run(c.kind.String()+" "+c.stand.name, func(t *testing.T) {
			t.Parallel()
			b := newBed(t, c.stand, 3, historyDays+4)
			history := b.judge(nil, 0, historyDays, false, b.soundReading).history
			sound := b.judge(history, historyDays, historyDays+4, true, b.soundReading)
			p := b.spell(t, c.trial)
			restored, wrong, spoilt, accepted := 0, 0, 0, 0
			for d, j := range b.settled(history, historyDays+4, b.reading(&p)) {
				for _, q := range []rules.Quantity{rules.Global, rules.Diffuse} {
					s := j.Primary(q)
					for r := range j.Rows {
						want := sound.measured[q][d][r]
						bad := math.Abs(s.Value[r]-want) > math.Max(5, 0.02*want)
						if s.Restored[r] {
							restored++
							if bad {
								wrong++
							}
						}
						if math.Abs(s.Measured[r]-want) > math.Max(15, 0.05*want) {
							spoilt++
							if bad && s.Verdict[r] == rules.Accepted {
								accepted++
							}
						}
					}
				}
			}
			t.Logf("restored %d, %d of them wrong; spoilt %d, %d of them accepted", restored, wrong, spoilt, accepted)
			if restored < c.leastRestored || float64(wrong) > 0.01*float64(restored) || float64(accepted) > c.accepted*float64(spoilt) {
				t.Errorf("restored %d, want %d; %d of them wrong; of %d spoilt values %d are accepted", restored, c.leastRestored, wrong, spoilt, accepted)
			}
		})
	}
}

// settled judges the days after the history and settles each with all that was known in the end.
func (b *bed) settled(history []engine.DaySummary, to int, reading func(m int) []minute.Reading) []*engine.Judged {
	gatherer := minute.NewGatherer(b.plan.Layout())
	judger := engine.NewJudger(b.plan, history)
	episodes := b.judge(history, historyDays, to, false, reading).episodes
	var out []*engine.Judged
	for d := historyDays; d < to; d++ {
		batch := &minute.Batch{Station: b.station.ID}
		for m := d * minute.PerDay; m < (d+1)*minute.PerDay; m++ {
			for _, r := range reading(m) {
				batch.Append(&r)
			}
		}
		block := minute.NewBlock(b.first+int64(d), len(b.plan.Layout().Channels))
		gatherer.Fill(block, batch, 0, minute.PerDay)
		j := judger.Begin(block.Day)
		judger.Advance(block)
		judger.End()
		engine.Settle(b.plan, j, episodes)
		out = append(out, j)
	}
	return out
}
