package main

import (
	"context"
	"fmt"
	"io"
	"os"

	"github.com/urfave/cli/v2"

	"rhotrace/experiment"
	"rhotrace/io/arrowfile"
	"rhotrace/io/table"
)

// standardInput is the name of the experiment "-" in messages.
const standardInput = "standard input"

// largestInput bounds what is read from standard input.
const largestInput = 64 << 20

// experimentOf reads the one experiment file of a command line, with the turns
// of --turn applied where the verb has that option.
func (s *session) experimentOf(c *cli.Context) (*experiment.Experiment, error) {
	files := c.Args().Slice()
	switch {
	case len(files) == 0:
		return nil, mistaken("%s: no file is given; write `rhotrace %s FILE`, with - for standard input", c.Command.Name, c.Command.Name)
	case len(files) > 1:
		return nil, mistaken("%s takes one experiment file, and there are %d: %s; give one", c.Command.Name, len(files), list(files))
	}
	e, err := s.readExperiment(c.Context, files[0])
	if err != nil {
		return nil, err
	}
	return edited(e, c.StringSlice("turn"))
}

func (s *session) readExperiment(ctx context.Context, file string) (*experiment.Experiment, error) {
	if file != "-" {
		if text, is, err := resultText(file); is {
			if err != nil {
				return nil, mistaken("%s: %w", file, err)
			}
			e, err := experiment.Read(file, text)
			return e, unread(err)
		}
		e, err := experiment.ReadFile(file)
		return e, unread(err)
	}
	text, err := readAll(ctx, s.in)
	if err != nil {
		return nil, fmt.Errorf("%s: cannot be read: %w", standardInput, err)
	}
	if len(text) > largestInput {
		return nil, mistaken("%s: is longer than %d MiB; that is no experiment file", standardInput, largestInput>>20)
	}
	e, err := experiment.Read(standardInput, text)
	return e, unread(err)
}

// resultText takes the experiment out of a result: an Arrow file of this
// program holds the experiment that it came from. is tells whether the file is
// an Arrow file at all.
func resultText(file string) (text []byte, is bool, err error) {
	f, err := os.Open(file)
	if err != nil {
		return nil, false, nil // the reader of experiments says what is wrong
	}
	defer f.Close()
	magic := make([]byte, 6)
	if _, err := io.ReadFull(f, magic); err != nil || string(magic) != "ARROW1" {
		return nil, false, nil
	}
	if _, err := f.Seek(0, io.SeekStart); err != nil {
		return nil, true, err
	}
	t, err := arrowfile.Read(f)
	if err != nil {
		return nil, true, err
	}
	own, ok := t.Meta[table.MetaExperiment]
	if !ok {
		return nil, true, fmt.Errorf("this Arrow file holds no experiment; name a result of rhotrace or an experiment file")
	}
	return []byte(own), true, nil
}

// readAll reads at most one byte more than is allowed. An interruption ends it,
// though the reader may still be waiting for more.
func readAll(ctx context.Context, in io.Reader) ([]byte, error) {
	type result struct {
		text []byte
		err  error
	}
	read := make(chan result, 1)
	go func() {
		text, err := io.ReadAll(io.LimitReader(in, largestInput+1))
		read <- result{text, err}
	}()
	select {
	case r := <-read:
		return r.text, r.err
	case <-ctx.Done():
		return nil, ctx.Err()
	}
}

// edited applies turns as if the file had said so.
func edited(e *experiment.Experiment, texts []string) (*experiment.Experiment, error) {
	turns := make([]experiment.Turn, len(texts))
	seen := map[string]bool{}
	for i, text := range texts {
		turn, err := e.ParseTurn(text)
		if err != nil {
			return nil, mistaken("--turn: %w", err)
		}
		if seen[turn.Path] {
			return nil, mistaken("--turn: %s is turned twice; give it once", turn.Path)
		}
		seen[turn.Path] = true
		turns[i] = turn
	}
	e, err := e.Edit(turns...)
	if err != nil {
		return nil, mistaken("--turn: %w", err)
	}
	return e, nil
}

// turnOption stands on the verbs that run an experiment.
func turnOption() cli.Flag {
	return &cli.StringSliceFlag{Name: "turn", Usage: "turn a dial: `PATH=\"VALUE UNIT\"`, as if the file had said so; may be repeated"}
}
