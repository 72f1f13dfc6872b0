// Package sensor turns what an instrument puts out into what it measures: voltages into
// irradiances, resistances into temperatures, body and dome temperatures into longwave.
//
// Voltages are in microvolts or millivolts as the name says, temperatures in kelvin or degrees C as
// the name says, fluxes in W m-2. A value outside a function's stated range gives NaN.
package sensor
