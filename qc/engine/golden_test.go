package engine

import (
	"flag"
	"fmt"
	"os"
	"strings"
	"testing"

	"fluxwarden/qc/fault"
)

var update = flag.Bool("update", false, "write the golden digests anew")

const goldenFile = "../../testdata/engine/golden_week.txt"

// TestGoldenWeek holds the rows of an invented week: the digests stand in testdata, and where they change JudgeVersion has to be
// raised, for then archives judged before and after differ. They are of what
// conversion and tests alone come to.
func TestGoldenWeek(t *testing.T) {
	text := fmt.Sprintf("judge_version %d\n", JudgeVersion)
	for _, station := range []string{meadowText, fieldText} {
		p := planOf(t, station)
		first := dayOf(t, "2026-03-23")
		b := inventedDays(p, first, 7, 1, true)
		judgeDays(p, NewJudger(p, nil), b, first, 7, func(j *Judged, _ DaySummary, _ []fault.Episode) {
			testsAlone(p, j)
			text += fmt.Sprintf("%s tests %d %s\n", p.Station.ID, j.Day-first, canonicalDigest(j))
		})
	}
	if *update {
		if err := os.WriteFile(goldenFile, []byte(text), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, err := os.ReadFile(goldenFile)
	if err != nil {
		t.Fatal(err)
	}
	if string(want) == text {
		return
	}
	t.Error("rows of the golden week have changed: if that is meant, raise JudgeVersion (once a release) and run go test ./qc/engine -run Golden -update")
	wantLines := strings.Split(string(want), "\n")
	for i, line := range strings.Split(text, "\n") {
		if i >= len(wantLines) || wantLines[i] != line {
			t.Logf("now: %s", line)
		}
	}
}
