package engine

import (
	"math"
	"testing"

	"fluxwarden/qc/fault"
	"fluxwarden/qc/minute"

	"pgregory.net/rapid"
)

// TestColumnsUsedAgain: a day judged in columns that held another day, of which rows are left beyond its own end, is the day judged in
// new ones.
func TestColumnsUsedAgain(t *testing.T) {
	for _, text := range []string{meadowText, fieldText, plainText, calibratedText} {
		p := planOf(t, text)
		day := dayOf(t, "2026-03-25")
		full, short := inventedDays(p, day, 1, 3, true), inventedDays(p, day+1, 1, 4, true)
		block := blockOf(p, short, day+1)
		block.Rows = 700
		judge := func(j *Judged) string {
			judger := NewJudger(p, nil)
			judger.BeginWith(j)
			judger.Advance(block)
			Settle(p, j, judger.Episodes())
			before := canonicalDigest(j)
			judger.End()
			Settle(p, j, judger.Episodes())
			block.Rows = 700
			return before + canonicalDigest(j)
		}
		want := judge(p.NewJudged(day + 1))
		used := p.NewJudged(day)
		judger := NewJudger(p, nil)
		judger.BeginWith(used)
		judger.Advance(blockOf(p, full, day))
		judger.End()
		Settle(p, used, []fault.Episode{{Instrument: "G1", Kind: 11, Severity: 1, From: day * minute.PerDay, To: fault.Open}})
		p.Reset(used, day+1)
		if judge(used) != want {
			t.Errorf("%s: other rows in columns that are used again", p.Station.ID)
		}
	}
}

// TestAnyNumbers: whatever finite numbers a logger sends, nothing panics, no row holds an infinity, its sets agree with its outcomes, and the
// day's summary can be written and read back.
func TestAnyNumbers(t *testing.T) {
	plans := []*Plan{planOf(t, meadowText), planOf(t, plainText), planOf(t, calibratedText)}
	number := rapid.OneOf(rapid.Float64Range(-100, 1500), rapid.Float64(), rapid.SampledFrom([]float64{0, -7999, 9.96921e36, 1e8, -5999, math.SmallestNonzeroFloat64, math.MaxFloat64}))
	rapid.Check(t, func(t *rapid.T) {
		p := plans[rapid.IntRange(0, len(plans)-1).Draw(t, "station")]
		day := int64(rapid.IntRange(-10_000, 40_000).Draw(t, "day"))
		var b minute.Batch
		pool := rapid.SliceOfN(number, 1, 12).Draw(t, "numbers")
		d := dice(rapid.Uint64().Draw(t, "seed"))
		some := func() float64 { return pool[int(d.share()*float64(len(pool)))] }
		for m := range int64(minute.PerDay) {
			if d.share() < 0.1 {
				continue
			}
			r := minute.Reading{At: minute.Stamp(day*minute.PerDay+m) * minute.MicrosPerMinute}
			for _, c := range p.layout.Channels {
				switch {
				case d.share() < 0.1:
				case d.share() < 0.2:
					r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Value{Mean: some(), SD: math.Abs(some()), Min: some(), Max: some(), N: int32(1 + 59*d.share())}})
				default:
					r.Values = append(r.Values, minute.ChannelValue{Channel: c, Value: minute.Single(some())})
				}
			}
			b.Append(&r)
		}
		judger := NewJudger(p, nil)
		for range 2 {
			j := judger.Begin(day)
			judger.Advance(blockOf(p, &b, day))
			s := judger.End()
			Settle(p, j, judger.Episodes())
			for i := range j.Series {
				s := &j.Series[i]
				for r := range j.Rows {
					for _, v := range [...]float64{s.Measured[r], s.Value[r], s.Min[r], s.Max[r], s.SD[r]} {
						if math.IsInf(v, 0) || math.Abs(v) > 1e15 {
							t.Fatalf("%s row %d holds %v", s.Instrument, r, v)
						}
					}
				}
			}
			Settle(p, j, nil)
			soundRows(t, p, j)
			back, err := DecodeSummary(encoded(t, &s))
			if err != nil {
				t.Fatal(err)
			}
			if string(encoded(t, &back)) != string(encoded(t, &s)) {
				t.Fatal("the summary is written otherwise once it was read back")
			}
			day++
		}
	})
}
