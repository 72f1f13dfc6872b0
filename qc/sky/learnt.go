package sky

import (
	"math"

	"fluxwarden/qc/exact"
)

// A DayFit is what one day's clear minutes said of a station's sky.
type DayFit struct {
	Day         int64   // since 1970
	Minutes     int     // clear ones that it rests on
	LogAerosol  float64 // of LogOf, the day's median
	DiffuseGain float64 // measured over modelled diffuse at the beam's own load, the day's median
}

// Learnt is what a station's sky is expected to be on a day, from the days before.
type Learnt struct {
	Aerosol     float64
	LogSpread   float64 // standard deviation of LogOf(Aerosol): it widens with the age of what was learnt
	DiffuseGain float64 // what ground and aerosol of the site do to the model's diffuse
	GlobalGain  float64 // how the global instrument stands to direct and diffuse, within what calibrations allow
	Days        int     // that it rests on; 0 is nothing but defaults
	LastDay     int64   // the latest of them
}

const (
	// logFloor keeps the logarithm of a load finite: twice the load of the cleanest sea air could not be told from it.
	logFloor = 0.01
	// memoryDays is in how many days half of a load's departure from its mean is forgotten: air masses change in two or three days (Anderson
	// et al. 2003, J. Atmos. Sci. 60, 119, from memory, find a correlation that is lost within days).
	memoryDays = 2.0
	// loadLogSpread is the standard deviation of the logarithm of daily loads: about lognormal, geometric standard deviations of 1.6 to 2
	// (O'Neill et al. 2000, Geophys. Res. Lett. 27, 2161, from memory).
	loadLogSpread = 0.6
	// fitLogSpread is how well one day's load is known for that day.
	fitLogSpread = 0.15
	// priorDays is how many days the default counts as.
	priorDays = 0.5
	// gainHalfDays is in how many days the diffuse's gain counts half: the ground changes slowly.
	gainHalfDays = 10.0
	// wholeDayMinutes is how many clear minutes make a day count in full.
	wholeDayMinutes = 60
	// Bounds of what may be learnt. Beyond, it is not the sky: dirt only takes, and is never learnt as air.
	diffuseGainMin, diffuseGainMax = 0.75, 1.3
	globalGainMin, globalGainMax   = 0.97, 1.03
)

// LogOf is the scale that loads are averaged on.
func LogOf(aerosol float64) float64 { return exact.Log(aerosol + logFloor) }

// Learn makes what is expected on a day from the fits of days before it (ascending; later ones and those over thirty days old are left
// out), from the default load and from the closure that the station's instruments have, global over direct on the horizontal plus diffuse.
//
// The load is a process that returns to its mean: x = mu + 2^(-age/memory) (x_last - mu), x its logarithm, mu the mean of all days and of
// the default. Its spread is that of the days times sqrt(1 - 2^(-2 age/memory)), with what a fit leaves open. The diffuse's gain is a mean
// that forgets slowly.
func Learn(day int64, fits []DayFit, defaultAerosol, closure float64) Learnt {
	out := Learnt{DiffuseGain: 1, GlobalGain: 1}
	sum, weights := float64(priorDays*LogOf(defaultAerosol)), priorDays
	gains, gainWeights := 0.0, priorDays // the logarithm of one is nothing
	last := math.NaN()
	for i := range fits {
		f := &fits[i]
		age := float64(day - f.Day)
		if !(age >= 1 && age <= 30) || f.Minutes <= 0 || !(f.LogAerosol >= LogOf(0)) {
			continue
		}
		w := min(1, float64(f.Minutes)/wholeDayMinutes)
		sum, weights = sum+float64(w*f.LogAerosol), weights+w
		out.Days, out.LastDay, last = out.Days+1, f.Day, f.LogAerosol
		if f.DiffuseGain > 0 {
			w = float64(w * exact.Exp(-age*(math.Ln2/gainHalfDays)))
			gains, gainWeights = gains+float64(w*exact.Log(min(max(f.DiffuseGain, diffuseGainMin), diffuseGainMax))), gainWeights+w
		}
	}
	mean := sum / weights
	out.LogSpread = loadLogSpread
	if out.Days > 0 {
		kept := exact.Exp(-float64(day-out.LastDay) * (math.Ln2 / memoryDays))
		mean += float64(kept * (last - mean))
		out.LogSpread = math.Sqrt(float64(fitLogSpread*fitLogSpread) + float64(loadLogSpread*loadLogSpread*(1-float64(kept*kept))))
	}
	out.Aerosol = max(0, exact.Exp(mean)-logFloor)
	out.DiffuseGain = min(max(exact.Exp(gains/gainWeights), diffuseGainMin), diffuseGainMax)
	if closure > 0 {
		out.GlobalGain = min(max(closure, globalGainMin), globalGainMax)
	}
	return out
}

// Fit is the sky of one day as its own clear minutes have it.
func Fit(day int64, logAerosol, diffuseGain, closure float64) Learnt {
	out := Learnt{Aerosol: max(0, exact.Exp(logAerosol)-logFloor), LogSpread: fitLogSpread, DiffuseGain: 1, GlobalGain: 1, Days: 1, LastDay: day}
	if diffuseGain > 0 {
		out.DiffuseGain = min(max(diffuseGain, diffuseGainMin), diffuseGainMax)
	}
	if closure > 0 {
		out.GlobalGain = min(max(closure, globalGainMin), globalGainMax)
	}
	return out
}

// Apply turns the model's irradiance into what the station is expected to read.
func (l *Learnt) Apply(model Irradiance, cosZenith float64) Irradiance {
	diffuse := float64(l.DiffuseGain * model.DiffuseWm2)
	return Irradiance{GlobalWm2: float64(l.GlobalGain * (float64(model.DirectWm2*cosZenith) + diffuse)), DirectWm2: model.DirectWm2, DiffuseWm2: diffuse}
}

// AerosolBand is the load at so many standard deviations below and above the expected one.
func (l *Learnt) AerosolBand(deviations float64) (low, high float64) {
	x := LogOf(l.Aerosol)
	by := float64(deviations * l.LogSpread)
	return max(0, exact.Exp(x-by)-logFloor), min(AerosolMax, exact.Exp(x+by)-logFloor)
}

// Together is the load that makes direct and diffuse fit together, from the one that makes the beam fit alone: aerosol takes from the beam and
// gives to the diffuse, so a beam that is low while the diffuse is not high is not all aerosol. One step of Gauss and Newton in the
// logarithms, direct known to 1.5 % and the modelled diffuse, once its gain is learnt, to 7 % (own choice); beam and diffuse are the model's at the load and at one
// that is greater by step.
func Together(load, step float64, at, more Irradiance, diffuseGain, diffuseWm2 float64) float64 {
	const directSpread, diffuseSpread = 0.015, 0.07
	if !(diffuseWm2 > 0 && at.DiffuseWm2 > 0 && at.DirectWm2 > 0 && more.DirectWm2 > 0) {
		return load
	}
	jb := exact.Log(more.DirectWm2/at.DirectWm2) / (step * directSpread)
	jd := exact.Log(more.DiffuseWm2/at.DiffuseWm2) / (step * diffuseSpread)
	rd := exact.Log(diffuseWm2/float64(diffuseGain*at.DiffuseWm2)) / diffuseSpread
	return max(0, load+float64(jd*rd)/(float64(jb*jb)+float64(jd*jd)))
}
