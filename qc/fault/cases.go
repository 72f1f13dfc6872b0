package fault

import "fluxwarden/rules"

// caseCount is how many cases catalogueOfCases has. The order is fixed: a carry names them by number.
const caseCount = 44

// quietDays is how long an episode that only sunlit minutes can bear out may go without a word for it.
const quietDays = 36 * 60

var threeShortwave = []rules.Quantity{rules.Global, rules.Direct, rules.Diffuse}

var onlyGlobal = []rules.Quantity{rules.Global}

// catalogueOfCases lists what can be told from single minutes, in the order in which one minute is asked.
var catalogueOfCases [caseCount]faultCase

func init() {
	catalogueOfCases = [caseCount]faultCase{
		{kind: rules.SignalLost, quantity: rules.Global, raise: 4, most: 8, evidence: signalLost, number: "seen_instead_of_expected", unit: "W/m2"},
		{kind: rules.SignalLost, quantity: rules.Direct, raise: 4, most: 8, evidence: signalLost, number: "seen_instead_of_expected", unit: "W/m2"},
		{kind: rules.SignalLost, quantity: rules.Diffuse, raise: 4, most: 8, evidence: signalLost, number: "seen_instead_of_expected", unit: "W/m2"},
		{kind: rules.SignalLost, quantity: rules.Reflected, raise: 4, most: 8, evidence: signalBlank},
		{kind: rules.SignalLost, quantity: rules.LWDown, raise: 4, most: 8, evidence: signalBlank},
		{kind: rules.SignalLost, quantity: rules.LWUp, raise: 4, most: 8, evidence: signalBlank},
		{kind: rules.SignalLost, quantity: rules.UV, raise: 4, most: 8, evidence: signalBlank},
		{kind: rules.SignalLost, quantity: rules.PAR, raise: 4, most: 8, evidence: signalBlank},
		{kind: rules.SignalFrozen, quantity: rules.Global, raise: 5, most: 8, evidence: signalFrozen, number: "value", unit: "W/m2"},
		{kind: rules.SignalFrozen, quantity: rules.Direct, raise: 5, most: 8, evidence: signalFrozen, number: "value", unit: "W/m2"},
		{kind: rules.SignalFrozen, quantity: rules.Diffuse, raise: 5, most: 8, evidence: signalFrozen, number: "value", unit: "W/m2"},
		{kind: rules.SignalFrozen, quantity: rules.LWDown, raise: 5, most: 8, evidence: longwaveFrozen, number: "value", unit: "W/m2"},
		{kind: rules.SignalFrozen, quantity: rules.LWUp, raise: 5, most: 8, evidence: longwaveFrozen, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quiet: quietDays, quantity: rules.Global, needs: threeShortwave, raise: 5, most: 10, evidence: polarityReversed, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quiet: quietDays, quantity: rules.Direct, needs: threeShortwave, raise: 5, most: 10, evidence: polarityReversed, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quiet: quietDays, quantity: rules.Diffuse, needs: threeShortwave, raise: 5, most: 10, evidence: polarityReversed, number: "value", unit: "W/m2"},
		{kind: rules.UnitSlip, quiet: quietDays, quantity: rules.Global, needs: threeShortwave, raise: 5, most: 10, evidence: unitSlip, number: "factor", unit: "1"},
		{kind: rules.UnitSlip, quiet: quietDays, quantity: rules.Direct, needs: threeShortwave, raise: 5, most: 10, evidence: unitSlip, number: "factor", unit: "1"},
		{kind: rules.UnitSlip, quiet: quietDays, quantity: rules.Diffuse, needs: threeShortwave, raise: 5, most: 10, evidence: unitSlip, number: "factor", unit: "1"},
		{kind: rules.ChannelsSwapped, quiet: quietDays, quantity: rules.Global, needs: threeShortwave, raise: 5, most: 10, evidence: channelsSwapped, number: "diffuse_above_global", unit: "W/m2"},
		{kind: rules.PointingLost, quantity: rules.Direct, instrument: Tracker, needs: threeShortwave, raise: 6, most: 24, quiet: 5 * 1440, evidence: pointingLost, number: "global_over_clear_sky", unit: "1"},
		{kind: rules.ShadeOff, quantity: rules.Diffuse, needs: threeShortwave, raise: 6, most: 15, quiet: 2880, evidence: shadeOff, number: "share_of_beam_on_diffuse", unit: "1"},
		{kind: rules.Noise, quantity: rules.Global, needs: threeShortwave, raise: 6, most: 9, evidence: noise, number: "scatter", unit: "W/m2"},
		{kind: rules.Noise, quantity: rules.Direct, needs: threeShortwave, raise: 6, most: 9, evidence: noise, number: "scatter", unit: "W/m2"},
		{kind: rules.Noise, quantity: rules.Diffuse, needs: threeShortwave, raise: 6, most: 9, evidence: noise, number: "scatter", unit: "W/m2"},
		{kind: rules.RangeClipped, quantity: rules.Global, needs: threeShortwave, raise: 5, most: 8, quiet: 1300, evidence: rangeClipped, number: "rail", unit: "W/m2"},
		{kind: rules.ThermistorBad, quantity: rules.LWDown, raise: 5, most: 10, evidence: thermistorBad, number: "body_less_air", unit: "K"},
		{kind: rules.ZeroOffset, quantity: rules.Global, raise: 6, most: 9, evidence: zeroOffset, number: "offset", unit: "W/m2"},
		{kind: rules.ZeroOffset, quantity: rules.Diffuse, raise: 6, most: 9, evidence: zeroOffset, number: "offset", unit: "W/m2"},
		{kind: rules.DomeWet, quantity: rules.LWDown, raise: 6, most: 9, quiet: 720, evidence: wetPyrgeometer, number: "net", unit: "W/m2"},
		{kind: rules.VentilationLost, quantity: rules.Global, fan: true, raise: 6, most: 9, evidence: fanStopped},
		{kind: rules.VentilationLost, quantity: rules.Diffuse, fan: true, raise: 6, most: 9, evidence: fanStopped},
		{kind: rules.VentilationLost, quantity: rules.Reflected, fan: true, raise: 6, most: 9, evidence: fanStopped},
		{kind: rules.VentilationLost, quantity: rules.LWDown, fan: true, raise: 6, most: 9, evidence: fanStopped},
		{kind: rules.VentilationLost, quantity: rules.LWUp, fan: true, raise: 6, most: 9, evidence: fanStopped},
		{kind: rules.SignalFrozen, quantity: rules.Reflected, needs: onlyGlobal, raise: 5, most: 8, evidence: companionFrozen, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quantity: rules.Reflected, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionReversed, number: "value", unit: "W/m2"},
		{kind: rules.UnitSlip, quantity: rules.Reflected, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionSlip, number: "factor", unit: "1"},
		{kind: rules.SignalFrozen, quantity: rules.UV, needs: onlyGlobal, raise: 5, most: 8, evidence: companionFrozen, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quantity: rules.UV, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionReversed, number: "value", unit: "W/m2"},
		{kind: rules.UnitSlip, quantity: rules.UV, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionSlip, number: "factor", unit: "1"},
		{kind: rules.SignalFrozen, quantity: rules.PAR, needs: onlyGlobal, raise: 5, most: 8, evidence: companionFrozen, number: "value", unit: "W/m2"},
		{kind: rules.PolarityReversed, quantity: rules.PAR, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionReversed, number: "value", unit: "W/m2"},
		{kind: rules.UnitSlip, quantity: rules.PAR, needs: onlyGlobal, quiet: quietDays, raise: 5, most: 10, evidence: companionSlip, number: "factor", unit: "1"},
	}
	for i := range catalogueOfCases {
		catalogueOfCases[i].index = i
	}
}

// onlyBySun are the kinds that a minute without the sun says nothing of.
const onlyBySun = rules.FaultSet(1<<rules.PolarityReversed | 1<<rules.UnitSlip | 1<<rules.ChannelsSwapped | 1<<rules.PointingLost | 1<<rules.ShadeOff |
	1<<rules.RangeClipped)
