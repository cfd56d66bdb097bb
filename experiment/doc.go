// Package experiment holds the noun that a laboratory edits: one text file that
// describes levels, drives, decays, noise, a sequence of steps, a scan and a
// readout, and that Run turns into a table.
//
// Every quantity of the file is a Dial, named by its dotted key, for example
// "drive.clock.detuning". A scan turns a dial, a spread jitters one, a fit
// frees some. All values stand in one vector; the specification holds indices
// into it. An Experiment is never changed: With and Edit return new ones.
//
// All quantities are in SI units with ordinary frequencies (Hz).
package experiment
