package main

import (
	"fmt"

	"github.com/urfave/cli/v2"

	"rhotrace/experiment"
)

func (s *session) version() *cli.Command {
	return &cli.Command{
		Name:        "version",
		Usage:       "print the version",
		Description: "Prints the version, which also stands in every Arrow file.",
		Flags:       []cli.Flag{helpOption()},
		Action: func(c *cli.Context) error {
			if c.NArg() > 0 {
				return mistaken("version takes no file, and %q is given; leave it out", c.Args().First())
			}
			_, err := fmt.Fprintf(s.out, "rhotrace %s\n", experiment.Version)
			return err
		},
	}
}
