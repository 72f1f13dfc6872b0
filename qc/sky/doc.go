// Package sky models the cloudless sky: shortwave by Bird and Hulstrom, Ineichen and Perez, the
// simplified Solis model and Haurwitz; the molecular lower limit of diffuse; longwave from
// temperature and humidity; and the search for cloudless periods in measured series.
//
// Units: irradiances W m-2 on a horizontal plane except the direct, which is normal; temperatures in
// K or C as named; vapour pressure hPa; precipitable water and ozone cm. Every model states
// where it holds; outside, it returns ok = false, or NaN where it returns one number.
package sky

// Irradiance is what a cloudless-sky model gives, in W m-2: Global and Diffuse on the horizontal,
// Direct normal to the beam.
type Irradiance struct{ GlobalWm2, DirectWm2, DiffuseWm2 float64 }

// within reports lo <= x <= hi; false for NaN.
func within(x, lo, hi float64) bool { return x >= lo && x <= hi }
