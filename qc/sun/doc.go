// Package sun gives the geometry of the sun for a radiation station: its position, the
// extraterrestrial irradiance, air mass, the angle of incidence on a plane, rise and set, the
// horizon mask and eclipses.
//
// Two ways lead to the position. At is the solar position algorithm of Reda and Andreas
// in full, for one instant. A Day holds what changes slowly and gives the position for any
// second of one UTC day within 0.0005 degrees of At (measured: 0.00001), a hundred times faster.
//
// Conventions, everywhere in this package: latitude north and longitude east positive;
// azimuth from north, clockwise, in [0, 360); zenith angles are airless unless named
// apparent; times are UTC, which is taken as UT1 (they differ by less than 0.9 s, that is 0.004
// degrees of hour angle).
package sun
