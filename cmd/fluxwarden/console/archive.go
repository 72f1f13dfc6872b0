package console

import (
	"slices"

	"fluxwarden/qc/fault"
	"fluxwarden/rules"
	"fluxwarden/store"
)

// A library reads an archive that may be opened anew between two reads. Of a station that the archive does not know it has nothing.
type library struct {
	read func(func(a *store.Archive) error) error
}

// Of reads an archive that stays open.
func Of(a *store.Archive) func(func(a *store.Archive) error) error {
	return func(f func(a *store.Archive) error) error { return f(a) }
}

func (l library) stations() (ids []string) {
	_ = l.read(func(a *store.Archive) error { ids = a.Stations(); return nil }) // an archive that cannot be opened has none to show
	return ids
}

func (l library) has(station string) bool { return slices.Contains(l.stations(), station) }

// of reads if the archive has something of the station.
func (l library) of(station string, f func(a *store.Archive) error) error {
	return l.read(func(a *store.Archive) error {
		if !slices.Contains(a.Stations(), station) {
			return nil
		}
		return f(a)
	})
}

func (l library) minutes(station string, from, to int64, columns []string, each func(*store.Rows) error) error {
	return l.of(station, func(a *store.Archive) error { return a.ReadMinutes(station, from, to, columns, each) })
}

func (l library) faults(station string) (list []fault.Episode, err error) {
	err = l.of(station, func(a *store.Archive) (err error) { list, err = a.Faults(station); return err })
	return list, err
}

func (l library) days(station string) (days []int64, err error) {
	err = l.of(station, func(a *store.Archive) (err error) { days, err = a.RawDays(station); return err })
	return days, err
}

func (l library) revisions(station string, day int64) (list []store.Revision, err error) {
	err = l.of(station, func(a *store.Archive) (err error) { list, err = a.Revisions(station, day); return err })
	return list, err
}

func (l library) notes(station string) (list []rules.Note, err error) {
	err = l.of(station, func(a *store.Archive) (err error) { list, err = a.Notes(station); return err })
	return list, err
}
