package store

import (
	"strings"
	"testing"

	"fluxwarden/store/vfs"
)

// A schedule that something else has changed is refused; one whose writer died between the two files is not.
func TestTheScheduleHasAChecksum(t *testing.T) {
	mem := vfs.NewMem()
	a, err := OpenForWriting(mem, "/archive", Options{})
	if err != nil {
		t.Fatal(err)
	}
	defer a.Close()
	first, second := []RulesFrom{{"2026-06-01", "aa"}}, []RulesFrom{{"2026-06-01", "aa"}, {"2026-06-09", "bb"}}
	for _, list := range [][]RulesFrom{first, second} {
		if err := a.KeepSchedule(list); err != nil {
			t.Fatal(err)
		}
		if got, err := a.Schedule(); err != nil || len(got) != len(list) {
			t.Fatalf("%v, %v", got, err)
		}
	}
	text, err := vfs.ReadFileBytes(mem, "/archive/"+scheduleName)
	if err != nil {
		t.Fatal(err)
	}
	if err := a.writeAtomic(scheduleName, []byte(strings.Replace(string(text), "2026-06-09", "2026-06-08", 1))); err != nil {
		t.Fatal(err)
	}
	if _, err := a.Schedule(); err == nil || !strings.Contains(err.Error(), "changed by something else") {
		t.Errorf("a changed day: %v", err)
	}
	if err := a.KeepSchedule(first); err != nil { // the sums are of the schedule to come and of the one there is
		t.Fatal(err)
	}
	sums, err := vfs.ReadFileBytes(mem, "/archive/"+scheduleName+".sha256")
	if err != nil || strings.Count(string(sums), "\n") != 2 {
		t.Errorf("%q, %v", sums, err)
	}
}
