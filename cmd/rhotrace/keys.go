package main

import (
	"fmt"
	"slices"
	"strings"

	"github.com/urfave/cli/v2"

	"rhotrace/experiment"
	"rhotrace/io/spelling"
)

func (s *session) keys() *cli.Command {
	return &cli.Command{
		Name:      "keys",
		Usage:     "print the manual of the experiment file, key by key",
		ArgsUsage: "[BLOCK…]",
		Description: `
Prints every key that an experiment file may have, what it takes, its range, what
holds without it and what it means. Names that you choose stand as NAME. With
blocks, only theirs: rhotrace keys drive readout`,
		Flags:  []cli.Flag{helpOption()},
		Action: s.runKeys,
	}
}

func (s *session) runKeys(c *cli.Context) error {
	wanted := c.Args().Slice()
	blocks := blockNames()
	for _, word := range wanted {
		if !slices.Contains(blocks, word) {
			if near := spelling.Near(word, blocks); len(near) > 0 {
				return mistaken("keys: the experiment file has no block %q; did you mean %s?", word, orList(near))
			}
			return mistaken("keys: the experiment file has no block %q; it has %s", word, list(blocks))
		}
	}
	last := "-"
	for _, k := range experiment.Manual() {
		block := blockOf(k)
		if len(wanted) > 0 && !slices.Contains(wanted, block) {
			continue
		}
		if table := tableOf(k); table != last {
			if last != "-" {
				fmt.Fprintln(s.out)
			}
			if table != "" {
				fmt.Fprintf(s.out, "[%s]\n", table)
			}
			last = table
		}
		fmt.Fprintf(s.out, "%-13s %s\n", k.Path[strings.LastIndexByte(k.Path, '.')+1:], facts(k))
		fmt.Fprintf(s.out, "              %s\n", k.Doc)
	}
	return nil
}

// facts is what a key takes, in which range, and what holds without it.
func facts(k experiment.Key) string {
	text := k.Takes
	if k.Range != "" {
		text += ", " + k.Range
	}
	switch k.Default {
	case "":
	case "needed":
		text += "; must be given"
	default:
		text += "; " + k.Default + " unless given"
	}
	return text
}

// tableOf is the table of the file in which a key stands, "" for the top.
func tableOf(k experiment.Key) string {
	i := strings.LastIndexByte(k.Path, '.')
	return strings.TrimPrefix(k.Path[:max(i, 0)], ".")
}

// blockOf is the first part of the path of that table.
func blockOf(k experiment.Key) string {
	block, _, _ := strings.Cut(tableOf(k), ".")
	return block
}

// blockNames lists the blocks of the file format in the order of the manual.
func blockNames() (names []string) {
	for _, k := range experiment.Manual() {
		if b := blockOf(k); b != "" && !slices.Contains(names, b) {
			names = append(names, b)
		}
	}
	return names
}
