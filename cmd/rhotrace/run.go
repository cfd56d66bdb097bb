package main

import (
	"bufio"
	"context"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"os"
	"slices"
	"strings"
	"syscall"

	"github.com/urfave/cli/v2"
	"golang.org/x/term"

	"rhotrace/experiment"
	"rhotrace/io/spelling"
)

// Exit statuses.
const (
	done    = 0
	failed  = 1 // the work failed, or the world outside did
	mistook = 2 // the command line or a file is wrong
)

// session is one run of the command: its streams and verbs.
type session struct {
	in         io.Reader
	out        *bufio.Writer // standard output, flushed at the end
	rawOut     io.Writer
	errOut     io.Writer
	isTerminal func(stream any) bool
	verbs      []*cli.Command
}

// run carries out a command line (without the name of the program) and returns
// the exit status.
func run(ctx context.Context, args []string, in io.Reader, out, errOut io.Writer, isTerminal func(stream any) bool) int {
	s := &session{in: in, out: bufio.NewWriterSize(out, 64<<10), rawOut: out, errOut: errOut, isTerminal: isTerminal}
	s.verbs = []*cli.Command{s.predict(), s.fit(), s.dials(), s.verify(), s.keys(), s.version(), s.completion(), s.offer()}
	err := s.dispatch(ctx, args)
	if flushed := s.out.Flush(); err == nil && flushed != nil {
		err = outputError(flushed)
	}
	if err == nil {
		return done
	}
	fmt.Fprintf(errOut, "rhotrace: %s\n", oneLine(err.Error()))
	return status(err)
}

// isTerminal reports whether a stream is a terminal.
func isTerminal(stream any) bool {
	f, ok := stream.(*os.File)
	return ok && term.IsTerminal(int(f.Fd()))
}

// mistake is an error in the command line or in a file that it names.
type mistake struct{ error }

func (m mistake) Unwrap() error { return m.error }

func mistaken(format string, args ...any) error { return mistake{fmt.Errorf(format, args...)} }

// status is the exit status for an error.
func status(err error) int {
	var m mistake
	var e *experiment.Error
	if errors.As(err, &m) || errors.As(err, &e) {
		return mistook
	}
	return failed
}

// unread sorts an error met while reading a file: what it holds, or that it is
// not there, is a mistake; a disk or a permission is the world outside.
func unread(err error) error {
	var number syscall.Errno
	if err == nil || errors.As(err, &number) && !slices.Contains(wrongName, number) {
		return err
	}
	return mistake{err}
}

// wrongName are the errors of the operating system that a wrong name causes.
var wrongName = []syscall.Errno{syscall.ENOENT, syscall.ENOTDIR, syscall.EISDIR}

// outputError words an error of standard output.
func outputError(err error) error {
	var path *fs.PathError
	if errors.As(err, &path) {
		err = path.Err
	}
	return fmt.Errorf("standard output: cannot be written: %w; send it somewhere else", err)
}

// oneLine keeps a message to one line, whatever it quotes.
func oneLine(text string) string {
	return strings.Map(func(c rune) rune {
		if c < ' ' || c == 0x7f {
			return ' '
		}
		return c
	}, text)
}

// warn prints doubts.
func (s *session) warn(warnings []string) {
	for _, w := range warnings {
		fmt.Fprintf(s.errOut, "rhotrace: warning: %s\n", oneLine(w))
	}
}

// dispatch finds the verb, puts options before files and lets the verb work.
func (s *session) dispatch(ctx context.Context, args []string) error {
	if len(args) == 0 {
		s.overview(s.errOut)
		return mistaken("no verb is given; start with `rhotrace predict FILE`")
	}
	word, rest := args[0], args[1:]
	switch word {
	case "-h", "--help":
		s.overview(s.out)
		return nil
	case "help":
		if len(rest) == 0 {
			s.overview(s.out)
			return nil
		}
		word, rest = rest[0], []string{"--help"}
	case "--version":
		word = "version"
	}
	verb := s.verb(word)
	if verb == nil {
		return s.unknownVerb(word)
	}
	words := append([]string{"rhotrace", verb.Name}, rest...)
	if !verb.SkipFlagParsing {
		options, files, err := arrange(verb, rest)
		if err == errHelp {
			help(s.out, verb)
			return nil
		}
		if err != nil {
			return err
		}
		words = slices.Concat([]string{"rhotrace", verb.Name}, options, []string{"--"}, files)
	}
	err := s.app().RunContext(ctx, words)
	if err != nil && ctx.Err() != nil {
		return errors.New("interrupted; nothing was written")
	}
	return err
}

// app wraps the verbs for the command-line library.
func (s *session) app() *cli.App {
	for _, verb := range s.verbs {
		verb.HideHelp = true // the option is our own, on every verb
		verb.OnUsageError = func(_ *cli.Context, err error, _ bool) error { return mistake{err} }
	}
	return &cli.App{
		Name:                      "rhotrace",
		Commands:                  s.verbs,
		Writer:                    s.out,
		ErrWriter:                 s.errOut,
		HideHelp:                  true,
		HideHelpCommand:           true,
		DisableSliceFlagSeparator: true, // a comma in --turn is no separator
		ExitErrHandler:            func(*cli.Context, error) {},
	}
}

func (s *session) verb(name string) *cli.Command {
	for _, verb := range s.verbs {
		if verb.Name == name {
			return verb
		}
	}
	return nil
}

// verbNames lists the verbs that a user may type.
func (s *session) verbNames() (names []string) {
	for _, verb := range s.verbs {
		if !verb.Hidden {
			names = append(names, verb.Name)
		}
	}
	return names
}

func (s *session) unknownVerb(word string) error {
	if strings.HasPrefix(word, "-") {
		return mistaken("%s stands before the verb; write `rhotrace VERB %s …`, with one of %s", word, word, list(s.verbNames()))
	}
	if near := spelling.Near(word, s.verbNames()); len(near) > 0 {
		return mistaken("there is no verb %q; did you mean %s?", word, orList(near))
	}
	if strings.HasSuffix(word, ".toml") {
		return mistaken("there is no verb %q; did you mean `rhotrace predict %s`?", word, word)
	}
	return mistaken("there is no verb %q; the verbs are %s", word, list(s.verbNames()))
}

func list(words []string) string { return strings.Join(words, ", ") }

// orList joins words as "a, b or c".
func orList(words []string) string {
	if n := len(words); n > 1 {
		return list(words[:n-1]) + " or " + words[n-1]
	}
	return list(words)
}
