package store

import (
	"encoding/json"
	"errors"
	"fmt"
	"io/fs"
	"strings"
	"time"

	"fluxwarden/store/vfs"
)

// A RulesFrom says from which UTC day on a rule set holds for a daemon; the first holds for all days before it too.
type RulesFrom struct {
	From   string `json:"from"` // YYYY-MM-DD
	Digest string `json:"digest"`
}

const scheduleName = "rules/schedule.json"

// Schedule gives which rule set holds when, ascending; nil where no daemon has noted it.
func (a *Archive) Schedule() ([]RulesFrom, error) {
	text, err := vfs.ReadFileBytes(a.fs, a.path(scheduleName))
	if errors.Is(err, fs.ErrNotExist) {
		return nil, nil
	}
	if err != nil {
		return nil, err
	}
	if err := a.checkSchedule(text); err != nil {
		return nil, err
	}
	var list []RulesFrom
	if err := json.Unmarshal(text, &list); err != nil {
		return nil, fmt.Errorf("%s: %w; move it away to let the site file hold for all days", scheduleName, err)
	}
	for i, l := range list {
		if _, err := time.Parse(time.DateOnly, l.From); err != nil {
			return nil, fmt.Errorf("%s: day %q: not a date", scheduleName, l.From)
		}
		if i > 0 && l.From <= list[i-1].From {
			return nil, fmt.Errorf("%s: day %s is not after the one before", scheduleName, l.From)
		}
	}
	return list, nil
}

// checkSchedule holds the schedule against the sums beside it: of the one there is, or of the next one where the program died between the
// two. One written before there were sums is taken as it is.
func (a *Archive) checkSchedule(text []byte) error {
	sums, err := vfs.ReadFileBytes(a.fs, a.path(scheduleName+".sha256"))
	if errors.Is(err, fs.ErrNotExist) {
		return nil
	}
	if err != nil {
		return err
	}
	if !strings.Contains(string(sums), sumLine(scheduleName, text)) {
		return fmt.Errorf("%s: its sha256 is not the one beside it: it was changed by something else than a daemon; restore it, or move both away to let the site file hold for all days",
			scheduleName)
	}
	return nil
}

// sumBefore is the sum of the schedule that is about to be replaced.
func sumBefore(a *Archive) string {
	text, err := vfs.ReadFileBytes(a.fs, a.path(scheduleName))
	if err != nil {
		return ""
	}
	return sumLine(scheduleName, text)
}

// KeepSchedule replaces the schedule.
func (a *Archive) KeepSchedule(list []RulesFrom) error {
	if a.lock == nil {
		return fmt.Errorf("%s: archive %s is open to read only", scheduleName, a.dir)
	}
	text, err := json.MarshalIndent(list, "", " ")
	if err != nil {
		return err
	}
	text = append(text, '\n')
	if err := a.writeAtomic(scheduleName+".sha256", []byte(sumLine(scheduleName, text)+sumBefore(a))); err != nil {
		return err
	}
	return a.writeAtomic(scheduleName, text)
}

// verifySchedule looks whether the schedule can be read and its rule sets are kept.
func (a *Archive) verifySchedule() []Finding {
	list, err := a.Schedule()
	for _, l := range list {
		if ok, e := vfs.Exists(a.fs, a.path("rules/"+l.Digest+".yaml")); err == nil && (e != nil || !ok) {
			err = errors.Join(e, fmt.Errorf("the rule set %s that held from %s is not kept", l.Digest, l.From))
		}
	}
	if err != nil {
		return []Finding{{scheduleName, err.Error(), true}}
	}
	return nil
}
