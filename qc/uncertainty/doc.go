// Package uncertainty says how far a minute's value may be off, by the rules of the GUM (JCGM 100:2008) with the components that ASTM
// G213 lists: each has a standard uncertainty, they combine as the root of the sum of squares, and the expanded uncertainty is twice that.
//
// What is stated is of a sound instrument that is kept clean and levelled: soiling, dew, shading and drift beyond the class are faults, which
// the diagnosis names and the verdict tells. Components are taken as independent of each other. Values of shortwave are on the scale of
// their certificate (WRR); its distance from the SI is not part of it.
package uncertainty
