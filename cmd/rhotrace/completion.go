package main

import (
	_ "embed"
	"fmt"
	"os"
	"slices"
	"strings"

	"github.com/urfave/cli/v2"

	"rhotrace/experiment"
)

// The snippets hand the words of the command line to the hidden verb offer.
var (
	//go:embed completion/rhotrace.bash
	bashSnippet string
	//go:embed completion/rhotrace.zsh
	zshSnippet string
	//go:embed completion/rhotrace.fish
	fishSnippet string
)

var shells = []string{"bash", "zsh", "fish"}

func (s *session) completion() *cli.Command {
	return &cli.Command{
		Name:      "completion",
		Usage:     "print what teaches a shell to complete rhotrace's command lines",
		ArgsUsage: "bash|zsh|fish",
		Description: `
Prints what teaches a shell to complete verbs, options, files and, after --turn,
the dials of the experiment file on the line. For bash, put this into ~/.bashrc:

  eval "$(rhotrace completion bash)"

For zsh the same with zsh, in ~/.zshrc behind compinit. For fish:

  rhotrace completion fish > ~/.config/fish/completions/rhotrace.fish`,
		Flags: []cli.Flag{helpOption()},
		Action: func(c *cli.Context) error {
			if c.NArg() != 1 {
				return mistaken("completion takes the name of a shell: one of %s", list(shells))
			}
			snippet, ok := map[string]string{"bash": bashSnippet, "zsh": zshSnippet, "fish": fishSnippet}[c.Args().First()]
			if !ok {
				return mistaken("completion: there is nothing for the shell %q; there is for %s", c.Args().First(), list(shells))
			}
			_, err := s.out.WriteString(snippet)
			return err
		},
	}
}

// offer is the hidden verb behind the snippets: it takes the words of a command
// line up to the cursor, the unfinished one last, and prints a line for each
// word that may stand there. It prints nothing where a file belongs: the shell
// knows files better.
func (s *session) offer() *cli.Command {
	return &cli.Command{
		Name:            "offer",
		Hidden:          true,
		SkipFlagParsing: true,
		Action: func(c *cli.Context) error {
			words := c.Args().Slice()
			if len(words) == 0 {
				return nil
			}
			last := words[len(words)-1]
			for _, word := range s.offers(words[:len(words)-1], last) {
				if strings.HasPrefix(word, last) {
					fmt.Fprintln(s.out, word)
				}
			}
			return nil
		},
	}
}

// offers lists what may follow the words before.
func (s *session) offers(before []string, last string) []string {
	if len(before) == 0 || before[0] == "help" && len(before) == 1 {
		if strings.HasPrefix(last, "-") {
			return []string{"--help", "--version"}
		}
		return append(s.verbNames(), "help")
	}
	verb := s.verb(before[0])
	if verb == nil || verb.Hidden || slices.Contains(before, "--") {
		return nil
	}
	previous := before[len(before)-1]
	switch flag := findOption(verb, previous); {
	case flag != nil && takesValue(flag):
		if flag.Names()[0] == "turn" {
			return dialsOnLine(verb, before, "")
		}
		return nil
	case strings.HasPrefix(last, "--turn="):
		return dialsOnLine(verb, before, "--turn=")
	case strings.HasPrefix(last, "-") && last != "-":
		return unusedOptions(verb, before)
	case last == "-":
		return append(unusedOptions(verb, before), "-")
	case verb.Name == "completion":
		return shells
	case verb.Name == "keys":
		return blockNames()
	}
	return nil
}

// unusedOptions lists the long names of a verb's options (the short one where
// there is no long one) that the line does not have yet or that may be repeated.
func unusedOptions(verb *cli.Command, before []string) (names []string) {
	for _, flag := range verb.Flags {
		all := optionNames(flag)
		_, repeats := flag.(*cli.StringSliceFlag)
		if repeats || !slices.ContainsFunc(before, func(w string) bool { return slices.Contains(all, w) }) {
			names = append(names, all...)
		}
	}
	return names
}

// dialsOnLine lists the dials of the experiment file among the words, each with
// what stands before and the equals sign behind it.
func dialsOnLine(verb *cli.Command, before []string, prefix string) (words []string) {
	_, files, _ := arrange(verb, complete(verb, before[1:]))
	for _, file := range files {
		if info, err := os.Stat(file); err != nil || !info.Mode().IsRegular() {
			continue
		}
		e, err := experiment.ReadFile(file)
		if err != nil {
			continue
		}
		for _, d := range e.Dials() {
			words = append(words, prefix+d.Path+"=")
		}
	}
	return words
}

// complete gives an option at the end of the words a value, so that they can be
// parsed.
func complete(verb *cli.Command, words []string) []string {
	if len(words) > 0 {
		if flag := findOption(verb, words[len(words)-1]); flag != nil && takesValue(flag) {
			return append(slices.Clone(words), "value")
		}
	}
	return words
}
