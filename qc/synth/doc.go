// Package synth is the synthetic station: a real sun, a modelled sky with clouds that move, air, ground, instruments with
// the errors that their class allows, and a logger. It says what such a station would send for any instant, sound or with any
// fault of the catalogue, and beside it what was true. The demo, `simulate` and the tests share it.
//
// It is pure. What looks like chance is a hash of the seed, of what it is for and of the time, so a reading depends on the
// station, the seed, the climate, the faults and its stamp, and on no other reading: records may be asked for in any order.
//
// The physics is published where it decides something that is judged: sun, cloudless sky, longwave of the cloudless sky,
// the instruments' equations. The weather, the clouds and the size of the errors are our own choice, made to look like
// the climate they are named after. Nothing is fitted to a measured month, and nothing here should be used to tune the judge.
package synth
