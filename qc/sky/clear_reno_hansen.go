package sky

import "math"

// RenoHansen holds the thresholds of Reno and Hansen 2016 (Renewable Energy 90, 520-531), which compares
// measured global with a cloudless model in windows. Equation numbers are the paper's.
type RenoHansen struct {
	WindowSamples                     int
	StepMinutes                       float64
	MeanDifferenceMaxWm2              float64 // eq. 6
	MaxDifferenceMaxWm2               float64 // eq. 7
	LineDifferenceMin, LineDifference float64 // eq. 8: bounds of L - Lc, both exclusive
	SlopeDeviationMax                 float64 // eq. 9-11: sd of slopes over the mean, per minute
	StepDifferenceMaxWm2              float64 // eq. 12-14
}

// RenoHansenDefaults returns the paper's values for one-minute data and ten-minute windows.
func RenoHansenDefaults() RenoHansen {
	return RenoHansen{WindowSamples: 10, StepMinutes: 1, MeanDifferenceMaxWm2: 75, MaxDifferenceMaxWm2: 75,
		LineDifferenceMin: -5, LineDifference: 10, SlopeDeviationMax: 0.005, StepDifferenceMaxWm2: 8}
}

// JordanHansen returns the thresholds that Jordan and Hansen 2023 (Renewable Energy 209, 393, table 1) give for steps of
// 1, 5, 15 and 30 minutes; for another step ok is false. The window of the one-minute step is 50 minutes.
func JordanHansen(stepMinutes int) (rh RenoHansen, ok bool) {
	rh = RenoHansen{StepMinutes: float64(stepMinutes), MeanDifferenceMaxWm2: 75, LineDifferenceMin: -45, LineDifference: 80}
	switch stepMinutes {
	case 1:
		rh.WindowSamples, rh.MaxDifferenceMaxWm2, rh.SlopeDeviationMax, rh.StepDifferenceMaxWm2 = 50, 60, 0.005, 50
	case 5:
		rh.WindowSamples, rh.MaxDifferenceMaxWm2, rh.SlopeDeviationMax, rh.StepDifferenceMaxWm2 = 12, 65, 0.01, 60
	case 15:
		rh.WindowSamples, rh.MaxDifferenceMaxWm2, rh.SlopeDeviationMax, rh.StepDifferenceMaxWm2 = 6, 75, 0.032, 75
	case 30:
		rh.WindowSamples, rh.MaxDifferenceMaxWm2, rh.SlopeDeviationMax, rh.StepDifferenceMaxWm2 = 4, 90, 0.07, 96
	default:
		return RenoHansen{}, false
	}
	return rh, true
}

const (
	renoHansenRounds = 20
	// clearSunUpWm2 keeps night out: where the model itself is lower, nothing can be told.
	clearSunUpWm2 = 10.0
)

// Clear marks the samples that lie in at least one clear window; measured, modelled and clear are of equal length and
// evenly spaced, NaN is missing. A window with a missing value, or with a modelled value below
// 10 W m-2, is not clear. The model is scaled by alpha, the least-squares ratio over the clear samples, and
// the search repeated until alpha stands to four decimals (20 rounds at most). It returns alpha (1 when
// nothing is clear) and the number of clear samples.
func (rh RenoHansen) Clear(measuredWm2, modelledWm2 []float64, clear []bool) (alpha float64, count int) {
	alpha = 1
	for range renoHansenRounds {
		count = rh.mark(measuredWm2, modelledWm2, alpha, clear)
		if count == 0 {
			return 1, 0
		}
		var gc, cc float64
		for i, ok := range clear {
			if ok {
				gc += float64(measuredWm2[i] * modelledWm2[i])
				cc += float64(modelledWm2[i] * modelledWm2[i])
			}
		}
		next := gc / cc
		if math.Abs(next-alpha) < 0.5e-4 {
			break
		}
		alpha = next
	}
	return alpha, count
}

func (rh RenoHansen) mark(measured, modelled []float64, alpha float64, clear []bool) int {
	for i := range clear {
		clear[i] = false
	}
	w := rh.WindowSamples
	if w < 3 {
		return 0
	}
	for start := 0; start+w <= len(clear); start++ {
		if rh.ClearWindow(measured[start:start+w], modelled[start:start+w], alpha) {
			for i := range w {
				clear[start+i] = true
			}
		}
	}
	count := 0
	for _, ok := range clear {
		if ok {
			count++
		}
	}
	return count
}

// ClearWindow applies the five criteria to one window, the model scaled by alpha; any NaN fails.
func (rh RenoHansen) ClearWindow(measured, modelled []float64, alpha float64) bool {
	n := len(measured)
	var mean, meanModel, line, lineModel, slopeSum, stepMax float64
	top, topModel := math.Inf(-1), math.Inf(-1)
	dt2 := float64(rh.StepMinutes * rh.StepMinutes)
	for i := range n {
		g, c := measured[i], float64(alpha*modelled[i])
		if !(modelled[i] >= clearSunUpWm2) || g != g {
			return false
		}
		mean, meanModel = mean+g, meanModel+c
		top, topModel = math.Max(top, g), math.Max(topModel, c)
		if i == 0 {
			continue
		}
		dg, dc := g-measured[i-1], c-float64(alpha*modelled[i-1])
		line += math.Sqrt(float64(dg*dg) + dt2)
		lineModel += math.Sqrt(float64(dc*dc) + dt2)
		slopeSum += dg / rh.StepMinutes
		stepMax = math.Max(stepMax, math.Abs(dg-dc))
	}
	mean, meanModel = mean/float64(n), meanModel/float64(n)
	slopeMean, squares := slopeSum/float64(n-1), 0.0
	for i := 1; i < n; i++ {
		d := (measured[i]-measured[i-1])/rh.StepMinutes - slopeMean
		squares += float64(d * d)
	}
	deviation := math.Sqrt(squares/float64(n-2)) / mean
	return math.Abs(mean-meanModel) < rh.MeanDifferenceMaxWm2 &&
		math.Abs(top-topModel) < rh.MaxDifferenceMaxWm2 &&
		line-lineModel > rh.LineDifferenceMin && line-lineModel < rh.LineDifference &&
		deviation < rh.SlopeDeviationMax && stepMax < rh.StepDifferenceMaxWm2
}

// LineLength returns the length of the curve through evenly spaced values, sum of sqrt(dG^2 + dt^2), dt in minutes: eq. 8
// of Reno and Hansen. Worked value: 20.124612 for 0, 2, 4 ... 18 a minute apart.
func LineLength(valuesWm2 []float64, stepMinutes float64) float64 {
	sum := 0.0
	for i := 1; i < len(valuesWm2); i++ {
		d := valuesWm2[i] - valuesWm2[i-1]
		sum += math.Sqrt(float64(d*d) + float64(stepMinutes*stepMinutes))
	}
	return sum
}

// SlopeDeviation returns the standard deviation (n-1) of the slopes between successive values over the values' mean, per
// minute: eq. 9 to 11. NaN for fewer than three values.
// Worked value: 0.191039 for 100, 110, 95, 120, 100, 130, 105, 115, 100, 118.
func SlopeDeviation(valuesWm2 []float64, stepMinutes float64) float64 {
	n := len(valuesWm2)
	if n < 3 {
		return math.NaN()
	}
	slopeMean, mean, squares := (valuesWm2[n-1]-valuesWm2[0])/float64(n-1)/stepMinutes, 0.0, 0.0
	for i, v := range valuesWm2 {
		mean += v
		if i > 0 {
			d := (v-valuesWm2[i-1])/stepMinutes - slopeMean
			squares += float64(d * d)
		}
	}
	return math.Sqrt(squares/float64(n-2)) / (mean / float64(n))
}
