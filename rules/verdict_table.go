package rules

// This file is the one table by which tests and faults become verdicts. Who may reject: the tests of the raw signal, the
// physically possible limits, and a fault that somebody should act on. Everything else questions at most: a cumulus
// edge, longwave above the air's in an inversion, a desert's upwelling longwave are good data.

// An Effect is what a test's miss or an open fault does to a verdict. Of several the greatest holds.
type Effect uint8

const (
	NoEffect    Effect = iota // nothing is kept beside the value either
	Report                    // stands in the reasons; the verdict stays
	Question                  // questioned
	Reject                    // rejected
	EffectCount = iota
)

var effectNames = [EffectCount]string{"none", "report", "question", "reject"}

func (e Effect) String() string { return effectNames[e] }

// Verdict is the verdict of a value that is there, if this is the greatest effect on it.
func (e Effect) Verdict() Verdict {
	switch e {
	case Reject:
		return Rejected
	case Question:
		return Questioned
	}
	return Accepted
}

// ClosureReportAboveDeg is the apparent zenith angle above which a miss of closure is only reported: there a directional
// error that the class allows is a large part of the sum.
const ClosureReportAboveDeg = 85

var testEffects = [TestCount]Effect{
	// There is no value, so there is nothing to judge: the verdict is absent.
	Missing: NoEffect,
	// The samples that came are sound, but the mean of a part of a minute can stand for the whole only roughly.
	Sampling: Question,
	// The stamp was ahead of the receipt. When a reading is received depends on its way, and a verdict may not: the same
	// readings from a file have no time of receipt. The wrong time itself is the fault clock_shift, which rejects.
	Clock: Report,
	// One of two different values under a stamp is wrong and the rule that picks one cannot know which. Often it is
	// one sample of sixty, so it is not thrown away.
	Conflict: Question,
	// An open wire, a full scale, a logger's mark or a body temperature that cannot be: the number is no measurement.
	Signal: Reject,
	// Nature does not go there.
	Possible: Reject,
	// Nature seldom goes there, and then it is worth keeping.
	Rare: Question,
	// A coarse logger under thick cloud or in the dark stands still too. The fault signal_frozen rejects.
	Stuck: Question,
	// A gap in the clouds jumps as far.
	Spike: Question,
	// Down to the class's zero offset and 5 W/m2 a negative night value is accepted; the test misses only beyond.
	NightZero: Question,
	// One of three is wrong and this test does not say which, so all three are questioned until a fault is named.
	// Above ClosureReportAboveDeg a miss is reported only: see ClosureEffect.
	Closure: Question,
	// Of two one is wrong; broken cloud near the sun breaks it honestly.
	DiffuseRatio: Question,
	// Snow on the ground with a shadow on one dome breaks it honestly.
	Albedo: Question,
	// Inversions and hot ground break it honestly.
	LWAir: Question,
	// As with the air temperature.
	LWPair: Question,
	// A very clean high site in thin air comes close to it.
	Rayleigh: Question,
	// Cloud edges lift global to 1.2 times the clear sky and more.
	ClearSky: Question,
	// Of two one is wrong and this test does not say which.
	Partner: Question,
	// The station itself says that it was not in its proper state; how much that spoils is for the faults to say.
	Housekeeping: Question,
	// Written by the station's people; a slip in an expression may not lose data.
	Local: Question,
}

// TestEffect is what a miss of the test does. A pass and a test that does not apply do nothing.
func TestEffect(t Test) Effect { return testEffects[t] }

// testsOf holds the tests of each effect, so that a minute's misses are looked up at once: the core asks for every value.
var testsOf = func() (sets [EffectCount]TestSet) {
	for t, effect := range testEffects {
		sets[effect] |= Test(t).Of()
	}
	return sets
}()

// TestsEffect is the greatest effect of the tests missed.
func TestsEffect(missed TestSet) Effect {
	for effect := Reject; effect > NoEffect; effect-- {
		if missed&testsOf[effect] != 0 {
			return effect
		}
	}
	return NoEffect
}

// ClosureEffect is what a miss of closure does at an apparent zenith angle, degrees.
func ClosureEffect(apparentZenithDeg float64) Effect {
	if apparentZenithDeg > ClosureReportAboveDeg {
		return Report
	}
	return testEffects[Closure]
}

var actEffects = [FaultKindCount]Effect{
	SignalLost:        Reject,
	SignalFrozen:      Reject,
	DataGap:           Report, // no value is there to judge; those at its edges are sound
	Noise:             Reject,
	RangeClipped:      Reject, // only the minutes at the rail
	PolarityReversed:  Reject,
	UnitSlip:          Reject,
	ChannelsSwapped:   Reject,
	ClockShift:        Reject,
	PointingLost:      Reject,
	ShadeOff:          Reject,
	DomeWet:           Reject,
	DomeSnow:          Reject,
	DomeSoiled:        Question, // some percent low, within what some uses bear
	DomeFouled:        Reject,
	SensorTilted:      Reject,
	SensitivityWrong:  Reject,
	SensitivityDrift:  Question, // about a percent a year, within what some uses bear
	ZeroOffset:        Reject,
	VentilationLost:   Question, // a few W/m2 of zero offset, which the class allows in part
	ThermistorBad:     Reject,
	Shadow:            Reject, // only at its bearing
	InstrumentTouched: Reject,
}

// FaultEffect is what an open episode does to the minutes that its kind reaches: one to watch is reported beside the value,
// one to act on rejects, or questions where the value stays of use. A value that could be restored is RestoredEffect.
func FaultEffect(kind FaultKind, severity Severity) Effect {
	if severity == Act {
		return actEffects[kind]
	}
	return Report
}

// RestoredEffect is the effect of an episode on a value that was restored from it with known uncertainty.
const RestoredEffect = Question

// noteEffects is what a person's note does to the minutes that it is about.
var noteEffects = [NoteKindCount]Effect{
	Remark: NoEffect, // said for the record only; it does not stand in the reasons
	// Somebody was at the instrument. The times of a note are generous and much of such a visit is sound, so nothing is thrown away; who
	// knows that a minute is spoilt says so with an override.
	Maintenance: Question,
	// A hand and a cloth over the dome, for a minute or two of the time stated.
	Cleaning: Question,
	// The instrument was moved in its mount while it measured.
	Levelling: Question,
	// Between one instrument and the next the channel measures nothing, and whose calibration holds cannot be known.
	Exchange: Reject,
	// The person's own verdict stands in the note: see Note.Verdict.
	Override:   Report,
	Withdrawal: NoEffect,
}

// NoteEffect is what a note of this kind does to the verdict of the minutes that it is about. An override replaces the verdict whatever
// else is said, and nothing makes a value that is not there.
func NoteEffect(k NoteKind) Effect { return noteEffects[k] }
