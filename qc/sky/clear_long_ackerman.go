package sky

import (
	"fmt"
	"math"

	"fluxwarden/qc/exact"
)

// LongAckerman holds the thresholds of the clear-minute search of Long and Ackerman 2000 (J. Geophys. Res.
// 105, 15609-15626) on one-minute global and diffuse. The scheme is the paper's; the numbers are from
// memory and meant to be set for a site. The zero value is not usable: start from LongAckermanDefaults.
type LongAckerman struct {
	NormalisedMinWm2, NormalisedMaxWm2 float64 // test 1: G/mu^GlobalExponent within these
	GlobalExponent                     float64
	DiffuseMaxWm2                      float64 // test 2: D < DiffuseMaxWm2 mu^0.5
	ChangeUpper, ChangeLower           float64 // test 3: W m-2 a minute, see clearChange
	RatioExponent                      float64 // test 4: (D/G)/mu^RatioExponent ...
	RatioSDMax                         float64 // ... has a standard deviation over RatioWindow below this
	RatioWindow                        int     // minutes, odd
	CosZenithMin                       float64 // the field of view of 160 degrees: zenith below 80
}

// LongAckermanDefaults returns the starting values: exponents 1.2 and -0.8, 1000..1250 W m-2, 150 W m-2,
// 8 W m-2 a minute, 0.0012 over 11 minutes.
func LongAckermanDefaults() LongAckerman {
	return LongAckerman{NormalisedMinWm2: 1000, NormalisedMaxWm2: 1250, GlobalExponent: 1.2, DiffuseMaxWm2: 150,
		ChangeUpper: 8, ChangeLower: 8, RatioExponent: -0.8, RatioSDMax: 0.0012, RatioWindow: 11, CosZenithMin: 0.17364817766693036}
}

// ClearDay is one day of consecutive minutes of one station, slices of equal length; NaN is missing.
type ClearDay struct {
	GlobalWm2, DiffuseWm2, CosZenith []float64
	ExtraterrestrialWm2              float64 // normal, of the day
}

// Clear marks the minutes that pass all four tests; clear must be as long as the day. A minute with a value missing, or
// whose window is not whole, is not clear. It returns the number of clear minutes.
func (la LongAckerman) Clear(day ClearDay, clear []bool) int {
	n := len(clear)
	ratio := make([]float64, n)
	noon := 0.0
	for i := range n {
		mu := day.CosZenith[i]
		noon = math.Max(noon, mu)
		ratio[i] = math.NaN()
		if mu > 0 && day.GlobalWm2[i] > 0 {
			ratio[i] = day.DiffuseWm2[i] / day.GlobalWm2[i] / exact.Pow(mu, la.RatioExponent)
		}
	}
	count := 0
	for i := range n {
		clear[i] = la.clearMagnitude(day, i) && la.clearChange(day, i, noon) && la.clearRatio(ratio, i)
		if clear[i] {
			count++
		}
	}
	return count
}

// clearMagnitude is tests 1 and 2 and the zenith limit.
func (la LongAckerman) clearMagnitude(day ClearDay, i int) bool {
	mu := day.CosZenith[i]
	if !(mu >= la.CosZenithMin) {
		return false
	}
	normalised := day.GlobalWm2[i] / exact.Pow(mu, la.GlobalExponent)
	return within(normalised, la.NormalisedMinWm2, la.NormalisedMaxWm2) && day.DiffuseWm2[i] < la.DiffuseMaxWm2*math.Sqrt(mu)
}

// clearChange is test 3: the change of global from the minute before must lie, in size, between bounds about the
// change outside the atmosphere: at most |dTOA| + ChangeUpper mu, at least |dTOA| - ChangeLower (mu(noon)+0.1)/mu.
func (la LongAckerman) clearChange(day ClearDay, i int, noon float64) bool {
	if i == 0 {
		return false
	}
	mu := day.CosZenith[i]
	change := math.Abs(day.GlobalWm2[i] - day.GlobalWm2[i-1])
	outside := math.Abs(day.ExtraterrestrialWm2 * (mu - day.CosZenith[i-1]))
	return change <= outside+float64(la.ChangeUpper*mu) && change >= outside-float64(la.ChangeLower*(noon+0.1))/mu
}

// clearRatio is test 4: the running standard deviation (n-1) of the normalised diffuse ratio.
func (la LongAckerman) clearRatio(ratio []float64, i int) bool {
	half := la.RatioWindow / 2
	if i < half || i+half >= len(ratio) || half == 0 {
		return false
	}
	return standardDeviation(ratio[i-half:i+half+1]) < la.RatioSDMax
}

// steadyRatioMax is the standard deviation of the normalised diffuse ratio up to which a window is steady: values of 0.0012 to 0.0015 are in
// use (from memory).
const steadyRatioMax = 0.0015

// SteadyRatio is the fourth test of Long and Ackerman on one window of diffuse over global, looking back only. The ratio is normalised by
// the cosine of the window's last minute, for within minutes it changes little.
func SteadyRatio(diffuseOverGlobal []float64, cosZenith float64) bool {
	return standardDeviation(diffuseOverGlobal) < float64(steadyRatioMax*exact.Pow(cosZenith, LongAckermanDefaults().RatioExponent))
}

// ClearSkyFit is a day's cloudless sky: G = GlobalA mu^GlobalB and D/G = RatioA mu^RatioB, mu the cosine of the zenith
// angle. It holds between the cosines it was fitted on.
type ClearSkyFit struct {
	GlobalA, GlobalB, RatioA, RatioB float64
	Minutes                          int
	CosZenithMin, CosZenithMax       float64
}

// GlobalAt returns cloudless global in W m-2 for a cosine of the zenith angle; 0 at night.
func (f ClearSkyFit) GlobalAt(cosZenith float64) float64 {
	if !(cosZenith > 0) {
		return 0
	}
	return float64(f.GlobalA * exact.Pow(cosZenith, f.GlobalB))
}

// DiffuseRatioAt returns cloudless diffuse over global for a positive cosine of the zenith angle, else NaN.
func (f ClearSkyFit) DiffuseRatioAt(cosZenith float64) float64 {
	if !(cosZenith > 0) {
		return math.NaN()
	}
	return float64(f.RatioA * exact.Pow(cosZenith, f.RatioB))
}

const (
	clearMinutesMin    = 120  // of the paper
	clearCosZenithSpan = 0.1  // below it an exponent cannot be told from a factor
	clearFitChangeMax  = 0.05 // refit until the exponents change by less
	clearFitRounds     = 10
)

// Fit searches a day for clear minutes and fits its cloudless sky, again with the new exponents until they change by
// less than 5 per cent. clear receives the last marks. Refused with the reason: fewer than 120 clear
// minutes, or too small a range of the sun's height.
func (la LongAckerman) Fit(day ClearDay, clear []bool) (ClearSkyFit, error) {
	var fit ClearSkyFit
	for range clearFitRounds {
		if n := la.Clear(day, clear); n < clearMinutesMin {
			return ClearSkyFit{}, fmt.Errorf("clear sky: %d clear minutes, %d needed: not a day to fit", n, clearMinutesMin)
		}
		fit = fitPowers(day, clear)
		if fit.CosZenithMax-fit.CosZenithMin < clearCosZenithSpan {
			return ClearSkyFit{}, fmt.Errorf("clear sky: clear minutes span %.2f of cosine of zenith, %v needed: not a day to fit",
				fit.CosZenithMax-fit.CosZenithMin, clearCosZenithSpan)
		}
		settled := math.Abs(fit.GlobalB/la.GlobalExponent-1) < clearFitChangeMax && math.Abs(fit.RatioB/la.RatioExponent-1) < clearFitChangeMax
		la.GlobalExponent, la.RatioExponent = fit.GlobalB, fit.RatioB
		if settled {
			break
		}
	}
	return fit, nil
}

// fitPowers fits both power laws by least squares in the logarithms.
func fitPowers(day ClearDay, clear []bool) ClearSkyFit {
	fit := ClearSkyFit{CosZenithMin: math.Inf(1), CosZenithMax: math.Inf(-1)}
	var sx, sxx, sg, sxg, sr, sxr float64
	for i, ok := range clear {
		if !ok || !(day.DiffuseWm2[i] > 0) {
			continue
		}
		mu := day.CosZenith[i]
		x, g, r := exact.Log(mu), exact.Log(day.GlobalWm2[i]), exact.Log(day.DiffuseWm2[i]/day.GlobalWm2[i])
		sx, sg, sr = sx+x, sg+g, sr+r
		sxx += float64(x * x)
		sxg += float64(x * g)
		sxr += float64(x * r)
		fit.Minutes++
		fit.CosZenithMin, fit.CosZenithMax = math.Min(fit.CosZenithMin, mu), math.Max(fit.CosZenithMax, mu)
	}
	n := float64(fit.Minutes)
	det := float64(n*sxx) - float64(sx*sx)
	fit.GlobalB = (float64(n*sxg) - float64(sx*sg)) / det
	fit.RatioB = (float64(n*sxr) - float64(sx*sr)) / det
	fit.GlobalA = exact.Exp((sg - float64(fit.GlobalB*sx)) / n)
	fit.RatioA = exact.Exp((sr - float64(fit.RatioB*sx)) / n)
	return fit
}

// standardDeviation is that of a sample (n-1); NaN if a value is, or with fewer than two.
func standardDeviation(x []float64) float64 {
	if len(x) < 2 {
		return math.NaN()
	}
	mean := 0.0
	for _, v := range x {
		mean += v
	}
	mean /= float64(len(x))
	sum := 0.0
	for _, v := range x {
		d := v - mean
		sum += float64(d * d)
	}
	return math.Sqrt(sum / float64(len(x)-1))
}
