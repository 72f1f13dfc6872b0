package product

// GapRules and UncertaintyRules say in a file's metadata what the package comment says in full.
const (
	GapRules = "UTC. Hour: at least 48 accepted minutes of 60 (common practice after WMO-No. 8). Day: mean of its 24 hours, all wanted; of shortwave an hour " +
		"may be missing, and counts as nothing, where the sun is not above 5 degrees in it (World Radiation Data Centre). Month: mean of the 96 quarters of " +
		"an hour of the day, each the mean of its minutes over all days and of at least 20 % of them, all 96 wanted (method 7 of Roesch et al. 2011, " +
		"doi 10.5194/amt-4-339-2011), and fewer than ten days without any (World Radiation Data Centre). Ratios: ratio of sums over the minutes that have " +
		"both, sun above 5 degrees; at least 80 % of these in an hour or a day, 20 % in a month. A mean that stands on less is left out; its count is not."
	UncertaintyRules = "95 %, k=2. Instrument, calibration and logger: wholly correlated from minute to minute, averaged. Sampling of the minute: independent, " +
		"averaged in squares. Instruments: independent of one another. Gaps of an hour: the missing minutes differ from the others by one standard deviation. " +
		"An hour that counts as nothing: between nothing and the clear sky's mean, rectangular. Gaps of a month: standard deviation of a quarter between " +
		"days times sqrt(1/k - 1/D), quarters wholly correlated."
)
