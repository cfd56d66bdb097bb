package main

import (
	"bytes"
	"os"
	"strings"
	"testing"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// TestFullDisk writes to a device that is always full, little and much.
func TestFullDisk(t *testing.T) {
	workIn(t)
	text, err := os.ReadFile("fringe.toml")
	require.NoError(t, err)
	much := strings.Replace(string(text), "points = 3", "points = 5000", 1)
	require.NoError(t, os.Symlink("/dev/full", "full.csv"))
	require.NoError(t, os.Symlink("/dev/full", "full.svg"))
	before := files(t)
	for _, in := range []string{string(text), much} {
		for option, name := range map[string]string{"-o": "full.csv", "--output": "/dev/full", "--figure": "full.svg"} {
			args := []string{"predict", "-", option, name}
			if option == "--figure" {
				args = append(args, "-o", "out.arrow") // does not appear alone either
			}
			status, out, errOut := invoke(in, args...)
			assert.Equal(t, failed, status, name)
			assert.Empty(t, out)
			assert.Equal(t, "rhotrace: "+name+": cannot be written: no space left on device; free some space or write it somewhere else\n", errOut)
			assert.Equal(t, before, files(t))
		}
		full, err := os.OpenFile("/dev/full", os.O_WRONLY, 0)
		require.NoError(t, err)
		var errOut bytes.Buffer
		assert.Equal(t, failed, run(t.Context(), []string{"predict", "-", "-o", "-"}, strings.NewReader(in), full, &errOut, isTerminal))
		assert.Equal(t, "rhotrace: standard output: cannot be written: no space left on device; send it somewhere else\n", errOut.String())
		require.NoError(t, full.Close())
	}
	status, _, errOut := invoke(string(text), "predict", "-", "-o", "/dev/null")
	assert.Equal(t, done, status, errOut)
}
