// Package simtest attacks the worker in simulated time. Everything in a run follows from its seed: what the stations send and
// when, duplicates and disorder, crashes of workers in and between commits, power cuts, trimmed and lost and remade
// journals, numbers given twice, and owners that do not know they have been replaced. At the end every acknowledged reading
// that the journal did not lose must be in raw once, and every station-day's rows must equal those of a clean run.
package simtest
