// Package rhotrace is the root of an open-system density-matrix simulator for
// optics laboratories. The command is in cmd/rhotrace; start reading at
// experiment, the noun that a laboratory edits.
package rhotrace
