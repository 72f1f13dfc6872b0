package metrics

import (
	"testing"
	"time"
)

// The delay of a reading's way makes its stamp look old; the most of a while is nearest to the clock.
func TestClockWatch(t *testing.T) {
	now := time.Unix(1e9, 0)
	f := New("test", time.Now).NewField()
	f.now = func() time.Time { return now }
	if _, ok := f.ClockAhead("northmoor"); ok {
		t.Error("a clock is known before any reading")
	}
	for i, step := range []struct {
		after time.Duration
		ahead float64
		want  float64
	}{{0, -3, -3}, {time.Second, -0.2, -0.2}, {time.Second, -9, -0.2}, {9 * time.Minute, 45, 45}, {5 * time.Minute, -1, 45}, {11 * time.Minute, -2, -1}, {25 * time.Minute, -7, -7}} {
		now = now.Add(step.after)
		f.Clock("northmoor", time.Duration(step.ahead*float64(time.Second)))
		if got, _ := f.ClockAhead("northmoor"); got != step.want {
			t.Errorf("step %d: %g, want %g", i, got, step.want)
		}
	}
}
