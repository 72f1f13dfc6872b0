package daemon

import (
	"time"

	"fluxwarden/rules"
)

// lookAtNotes tells the metrics at which stations somebody is at work by the notes that are kept, so that alerts can hold still. A note counts
// once it is committed.
func (d *Daemon) lookAtNotes() {
	now := d.config.Clock.Now()
	var ids []string
	for _, id := range d.stationIDs() {
		all, err := d.archive.Notes(id)
		if err != nil {
			d.metrics.Failed("archive")
			continue
		}
		if atWork(rules.InForce(all), now) {
			ids = append(ids, id)
		}
	}
	d.metrics.Maintenance(ids)
}

func atWork(notes []rules.Note, now time.Time) bool {
	for i := range notes {
		if n := &notes[i]; n.Silences() && !now.Before(n.From) && now.Before(n.To) {
			return true
		}
	}
	return false
}
