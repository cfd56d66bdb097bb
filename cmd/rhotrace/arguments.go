package main

import (
	"errors"
	"slices"
	"strings"

	"github.com/urfave/cli/v2"

	"rhotrace/io/spelling"
)

// arrange sorts the words behind a verb into options (with their values) and
// files, so that they may stand in any order: the command-line library would
// take every word behind the first file for a file. "--" ends the options, "-"
// is a file. An option that the verb does not have, that lacks its value or
// that is given twice where once is all, is a mistake; --help is errHelp.
func arrange(verb *cli.Command, words []string) (options, files []string, err error) {
	seen := map[string]bool{}
	for i := 0; i < len(words); i++ {
		word := words[i]
		if word == "--" {
			return options, append(files, words[i+1:]...), nil
		}
		if len(word) < 2 || word[0] != '-' {
			files = append(files, word)
			continue
		}
		name, _, valued := strings.Cut(word, "=")
		flag := findOption(verb, name)
		if flag == nil {
			return nil, nil, unknownOption(verb, name)
		}
		if flag.Names()[0] == helpName {
			return nil, nil, errHelp
		}
		if _, repeats := flag.(*cli.StringSliceFlag); seen[flag.Names()[0]] && !repeats {
			return nil, nil, mistaken("%s: the option is given twice; give it once", name)
		}
		seen[flag.Names()[0]] = true
		if valued && !takesValue(flag) {
			return nil, nil, mistaken("%s takes no value; write %s alone", name, name)
		}
		options = append(options, word)
		if valued || !takesValue(flag) {
			continue
		}
		i++
		if i == len(words) || findOption(verb, words[i]) != nil {
			placeholder, _ := usage(flag)
			return nil, nil, mistaken("%s needs a value; write %s %s", name, name, placeholder)
		}
		options = append(options, words[i])
	}
	return options, files, nil
}

// errHelp tells that help on a verb is asked for.
var errHelp = errors.New("help")

// dashed is how an option is typed.
func dashed(name string) string {
	if len(name) == 1 {
		return "-" + name
	}
	return "--" + name
}

// optionNames lists every name of an option as it is typed, the first first.
func optionNames(flag cli.Flag) (names []string) {
	for _, name := range flag.Names() {
		names = append(names, dashed(name))
	}
	return names
}

// findOption finds the option that a word names, nil if there is none.
func findOption(verb *cli.Command, word string) cli.Flag {
	for _, flag := range verb.Flags {
		if slices.Contains(optionNames(flag), word) {
			return flag
		}
	}
	return nil
}

func takesValue(flag cli.Flag) bool {
	f, ok := flag.(cli.DocGenerationFlag)
	return ok && f.TakesValue()
}

var (
	_ cli.DocGenerationFlag = &cli.StringFlag{}
	_ cli.DocGenerationFlag = &cli.StringSliceFlag{}
	_ cli.DocGenerationFlag = &cli.BoolFlag{}
)

// usage takes the placeholder for the value, which stands in backquotes, out of
// the description of an option.
func usage(flag cli.Flag) (placeholder, text string) {
	f, ok := flag.(cli.DocGenerationFlag)
	if !ok {
		return "", ""
	}
	parts := strings.SplitN(f.GetUsage(), "`", 3)
	if len(parts) < 3 {
		return "", f.GetUsage()
	}
	return parts[1], parts[0] + parts[1] + parts[2]
}

func unknownOption(verb *cli.Command, word string) error {
	var known, main []string
	for _, flag := range verb.Flags {
		known = append(known, optionNames(flag)...)
		main = append(main, dashed(flag.Names()[0]))
	}
	if near := spelling.Near(word, known); len(near) > 0 && len(word) > 2 {
		return mistaken("%s: `rhotrace %s` has no such option; did you mean %s?", word, verb.Name, orList(near))
	}
	return mistaken("%s: `rhotrace %s` has no such option; it has %s; a file of that name goes behind --", word, verb.Name, list(main))
}
