package fault

// judgeDay looks at what only a whole day can show.
func (w *Watcher) judgeDay(f *DayFacts) {}
