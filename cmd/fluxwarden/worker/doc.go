// Package worker takes readings from the journal, has them judged, and commits what was judged. It owns partitions: sets of
// stations that one worker at a time works on. It stands on interfaces only, so that a simulation can drive it.
//
// What a station's rows come to depends on the set of its readings, the notes and the rules alone. The worker judges
// minutes as they close, and where a reading comes after that, it judges the day again from all its readings before the next
// commit, and every later day that may look back on it. There is no other state than the archive and what can be rebuilt
// from it: a start after a crash, a taken-over partition and an ordinary start are one and the same.
package worker
