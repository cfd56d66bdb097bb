package experiment

import "rhotrace/io/spelling"

// nearest lists at most three known words that a mistyped one may have meant,
// nearest first.
func nearest(word string, known []string) []string { return spelling.Near(word, known) }
