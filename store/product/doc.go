// Package product makes the clean products of judged minutes: minutes, hours, days and months of what was accepted, with the radiation
// budget derived from it. All of it is a pure function of the rows of `minutes` and of Settings, so the products of a day are revised with
// its rows and are the same on every machine.
//
// Gap rules. Times are UTC. A mean always says on how many minutes it stands, and is withheld below the coverage stated:
//
//   - an hour stands on at least 48 of its 60 minutes (80 %: common practice after WMO-No. 8, from memory);
//   - a day is the mean of its 24 hours, and all of them are wanted. Of shortwave, an hour that is missing counts as nothing where the sun
//     is not above 5 degrees at any time in it, as in the rules of the World Radiation Data Centre for daily totals; so a day is never the
//     mean of its sunlit minutes. Of longwave, net and weather no hour may be missing (the same rules: all 24 hourly totals);
//   - a month is "method 7" of Roesch et al. 2011 (Atmos. Meas. Tech. 4, 339): each of the 96 quarters of an hour is the mean of its minutes over
//     all days and wants 20 % of them, and the month is the mean of the 96, all of them wanted. So gaps that fall on one time of the day
//     leave no bias. It is withheld, too, where ten days or more have no accepted minute (World Radiation Data Centre, monthly totals). A
//     quarter without data in which the sun is below 93 degrees of zenith angle all month counts as nothing for shortwave.
//   - ratios (albedo, diffuse fraction, clearness index) are ratios of sums over the minutes that have both, with the sun above 5 degrees, never means of
//     ratios; they want 80 % of such minutes in an hour or a day, 20 % in a month.
//
// Negatives at night: all are kept, or all are set to zero (Settings.NightZero), never only some.
//
// Uncertainty. The part of a minute's expanded uncertainty (95 %, k=2) that comes of instrument, calibration and logger is taken as wholly correlated from
// minute to minute, so it is averaged; the part that comes of sampling the minute (its spread over the root of its samples) is taken as
// independent, so it is averaged in squares. Instruments are taken as independent of one another; a scale that two share would cancel in a
// net, so that is on the safe side. What a gap adds: in an hour the missing minutes are taken to differ from the others by one standard
// deviation of them; an hour that counts as nothing adds the clear sky's mean, rectangular; in a month a quarter's mean is one of k days out of D,
// with the standard deviation between them times sqrt(1/k - 1/D), and the quarters are taken as wholly correlated.
package product
