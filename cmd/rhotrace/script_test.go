package main

import (
	"bytes"
	"context"
	"flag"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

var update = flag.Bool("update", false, "write what the command prints into the scripts")

// TestScripts runs testdata/*.txt. Each script works in a directory of its own
// that starts with the files of testdata/files. Its lines are
//
//	# a remark
//	edit NEW FROM "old" "new"    write NEW: FROM with one text replaced
//	$ rhotrace WORDS < FILE      run; < FILE is optional
//
// and behind a command what it has to do: standard output as it is, standard
// error with "! " before each line, "= 2" for an exit status other than 0, and
// "+ NAME" for each file that it makes. What stands there is compared with what
// happens: numbers to a thousandth (they are rounded to four digits, which may
// fall to either side), blanks by where they are, not by how many.
func TestScripts(t *testing.T) {
	scripts, err := filepath.Glob("testdata/*.txt")
	require.NoError(t, err)
	require.NotEmpty(t, scripts)
	for _, path := range scripts {
		t.Run(strings.TrimSuffix(filepath.Base(path), ".txt"), func(t *testing.T) { runScript(t, path) })
	}
}

func runScript(t *testing.T, path string) {
	text, err := os.ReadFile(path)
	require.NoError(t, err)
	script := strings.Split(strings.TrimSuffix(string(text), "\n"), "\n")
	workIn(t)
	var got []string
	for i := 0; i < len(script); i++ {
		line := script[i]
		got = append(got, line)
		switch {
		case line == "" || line[0] == '#':
		case strings.HasPrefix(line, "edit "):
			edit(t, cut(t, line))
		case strings.HasPrefix(line, "$ rhotrace"):
			i++
			first := i
			for i < len(script) && !isInstruction(script[i]) {
				i++
			}
			want := script[first:i]
			have := act(t, line)
			// A remark or an empty line before the next instruction is no output.
			rest := 0
			for rest < len(want) && want[len(want)-1-rest] == "" {
				rest++
			}
			want, gap := want[:len(want)-rest], want[len(want)-rest:]
			if !*update {
				assert.Truef(t, alike(want, have), "%s: %s\nwant:\n%s\n\ngot:\n%s", filepath.Base(path), line,
					strings.Join(want, "\n"), strings.Join(have, "\n"))
			}
			got = append(append(got, have...), gap...)
			i--
		default:
			t.Fatalf("%s:%d: no instruction: %s", path, i+1, line)
		}
	}
	if *update {
		t.Chdir(filepath.Dir(home))
		require.NoError(t, os.WriteFile(filepath.Join(home, path), []byte(strings.Join(got, "\n")+"\n"), 0o644))
	}
}

// home is the directory of the package.
var home = func() string {
	dir, err := os.Getwd()
	if err != nil {
		panic(err)
	}
	return dir
}()

func isInstruction(line string) bool {
	return strings.HasPrefix(line, "#") || strings.HasPrefix(line, "edit ") || strings.HasPrefix(line, "$ ")
}

// workIn goes to a fresh directory with the files.
func workIn(t testing.TB) {
	files, err := filepath.Glob(filepath.Join(home, "testdata/files/*"))
	require.NoError(t, err)
	dir := t.TempDir()
	for _, f := range files {
		text, err := os.ReadFile(f)
		require.NoError(t, err)
		require.NoError(t, os.WriteFile(filepath.Join(dir, filepath.Base(f)), text, 0o644))
	}
	switch t := t.(type) {
	case *testing.T:
		t.Chdir(dir)
	case *testing.B:
		t.Chdir(dir)
	}
}

// cut cuts a line at blanks; double quotes keep blanks, \n and \" are read.
func cut(t *testing.T, line string) (words []string) {
	var b strings.Builder
	quoted, any := false, false
	for i := 0; i < len(line); i++ {
		switch c := line[i]; {
		case c == '"':
			quoted, any = !quoted, true
		case c == '\\' && i+1 < len(line):
			i++
			any = true
			if line[i] == 'n' {
				b.WriteByte('\n')
			} else {
				b.WriteByte(line[i])
			}
		case c == ' ' && !quoted:
			if any {
				words = append(words, b.String())
			}
			b.Reset()
			any = false
		default:
			b.WriteByte(c)
			any = true
		}
	}
	require.False(t, quoted, "open quote: %s", line)
	if any {
		words = append(words, b.String())
	}
	return words
}

func edit(t *testing.T, words []string) {
	require.Len(t, words, 5, "edit NEW FROM old new")
	text, err := os.ReadFile(words[2])
	require.NoError(t, err)
	require.Contains(t, string(text), words[3])
	require.NoError(t, os.WriteFile(words[1], []byte(strings.Replace(string(text), words[3], words[4], 1)), 0o644))
}

// act runs a command and describes what it did.
func act(t *testing.T, line string) (lines []string) {
	words := cut(t, line)[2:]
	in := ""
	if i := slices.Index(words, "<"); i >= 0 {
		text, err := os.ReadFile(words[i+1])
		require.NoError(t, err)
		in, words = string(text), words[:i]
	}
	before := files(t)
	status, out, errOut := invoke(in, words...)
	if out != "" {
		lines = append(lines, strings.Split(strings.TrimSuffix(out, "\n"), "\n")...)
	}
	if errOut != "" {
		for _, l := range strings.Split(strings.TrimSuffix(errOut, "\n"), "\n") {
			lines = append(lines, "! "+l)
		}
	}
	if status != done {
		lines = append(lines, fmt.Sprintf("= %d", status))
	}
	for _, name := range files(t) {
		if !slices.Contains(before, name) {
			lines = append(lines, "+ "+name)
		}
	}
	return lines
}

// invoke runs the command as in a pipe.
func invoke(in string, args ...string) (status int, out, errOut string) {
	var o, e bytes.Buffer
	status = run(context.Background(), args, strings.NewReader(in), &o, &e, noTerminal)
	return status, o.String(), e.String()
}

func noTerminal(any) bool { return false }

func files(t testing.TB) (names []string) {
	entries, err := os.ReadDir(".")
	require.NoError(t, err)
	for _, e := range entries {
		names = append(names, e.Name())
	}
	return names
}

var (
	numeral = regexp.MustCompile(`[-−]?\d+(\.\d+)?(e[-+]?\d+)?`)
	blanks  = regexp.MustCompile(`\s+`)
)

// alike compares lines: numbers nearly, blanks loosely, all else exactly.
func alike(want, have []string) bool {
	if len(want) != len(have) {
		return false
	}
	for i := range want {
		w, h := blanks.ReplaceAllString(want[i], " "), blanks.ReplaceAllString(have[i], " ")
		if numeral.ReplaceAllString(w, "#") != numeral.ReplaceAllString(h, "#") {
			return false
		}
		a, b := numeral.FindAllString(w, -1), numeral.FindAllString(h, -1)
		for k := range a {
			x, errX := strconv.ParseFloat(a[k], 64)
			y, errY := strconv.ParseFloat(b[k], 64)
			if (errX != nil || errY != nil) && a[k] != b[k] {
				return false
			}
			if math.Abs(x-y) > 1e-3*math.Abs(x)+1e-9 {
				return false
			}
		}
	}
	return true
}

// TestAlike checks that the comparison of the scripts can fail.
func TestAlike(t *testing.T) {
	one := func(s string) []string { return []string{s} }
	assert.True(t, alike(one("a  0.2500 x"), one("a 0.25001 x")))
	assert.True(t, alike(one("p 0"), one("p -4e-16")))
	assert.False(t, alike(one("a 0.25"), one("a 0.26")))
	assert.False(t, alike(one("a 0.25"), one("b 0.25")))
	assert.False(t, alike(one("a"), nil))
}
