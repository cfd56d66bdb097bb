package main

import (
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// Every `$ rhotrace …` of a console block in README.md and in the examples is
// carried out where a reader would stand, and its output compared. -update
// writes the outputs anew.
func TestDocuments(t *testing.T) {
	root := filepath.Join(home, "..", "..")
	examples, err := filepath.Glob(filepath.Join(root, "examples", "*", "README.md"))
	require.NoError(t, err)
	require.GreaterOrEqual(t, len(examples), 6)
	dirs, err := filepath.Glob(filepath.Join(root, "examples", "*"))
	require.NoError(t, err)
	assert.Len(t, examples, len(dirs), "an example without a README.md")
	for _, document := range append(examples, filepath.Join(root, "README.md")) {
		name, err := filepath.Rel(root, document)
		require.NoError(t, err)
		t.Run(filepath.ToSlash(name), func(t *testing.T) {
			text, err := os.ReadFile(document)
			require.NoError(t, err)
			dir := t.TempDir()
			require.NoError(t, os.CopyFS(filepath.Join(dir, "examples"), os.DirFS(filepath.Join(root, "examples"))))
			t.Chdir(filepath.Join(dir, filepath.Dir(name)))
			now, commands := carryOut(t, string(text))
			assert.Positive(t, commands, "no command is shown")
			if *update {
				require.NoError(t, os.WriteFile(document, []byte(now), 0o644))
				return
			}
			assert.True(t, alike(strings.Split(string(text), "\n"), strings.Split(now, "\n")),
				"the output has changed; `go test ./cmd/rhotrace -update` writes it anew:\n%s", now)
		})
	}
}

// carryOut returns the document with the outputs that its commands have now.
func carryOut(t *testing.T, text string) (now string, commands int) {
	var out []string
	block := false
	for _, line := range strings.Split(text, "\n") {
		switch {
		case line == "```console":
			block = true
			out = append(out, line)
		case block && line == "```":
			block = false
			out = append(out, line)
		case block && strings.HasPrefix(line, "$ rhotrace "):
			commands++
			status, printed, errors := invoke("", cut(t, line)[2:]...)
			assert.Equal(t, done, status, "%s\n%s", line, errors)
			out = append(out, line)
			if printed += errors; printed != "" {
				out = append(out, strings.Split(strings.TrimSuffix(printed, "\n"), "\n")...)
			}
		case !block:
			out = append(out, line)
		}
	}
	return strings.Join(out, "\n"), commands
}
