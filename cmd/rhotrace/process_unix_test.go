//go:build unix

package main

import (
	"bytes"
	"os"
	"os/exec"
	"testing"
	"time"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"
)

// asCommand makes the test binary be rhotrace.
const asCommand = "RHOTRACE_TEST_AS_COMMAND"

func TestMain(m *testing.M) {
	if os.Getenv(asCommand) != "" {
		main()
	}
	os.Exit(m.Run())
}

// TestCtrlC interrupts a process while it works.
func TestCtrlC(t *testing.T) {
	workIn(t)
	require.NoError(t, os.WriteFile("slow.toml", []byte(slow), 0o644))
	before := files(t)
	command := exec.Command(os.Args[0], "predict", "slow.toml", "-o", "out.arrow")
	command.Env = append(os.Environ(), asCommand+"=1")
	var out, errOut bytes.Buffer
	command.Stdout, command.Stderr = &out, &errOut
	require.NoError(t, command.Start())
	require.Eventually(t, func() bool { return len(files(t)) > len(before) }, 20*time.Second, 5*time.Millisecond,
		"the temporary file stands there while the process works")
	require.NoError(t, command.Process.Signal(os.Interrupt))
	assert.Error(t, command.Wait())
	assert.Equal(t, failed, command.ProcessState.ExitCode())
	assert.Equal(t, "rhotrace: interrupted; nothing was written\n", errOut.String())
	assert.Empty(t, out.String())
	assert.Equal(t, before, files(t))
}

// TestBashCompletion hands words to the snippet as bash cuts them.
func TestBashCompletion(t *testing.T) {
	workIn(t)
	for words, want := range map[string]string{
		`rhotrace pr`:                                           "predict\n",
		`rhotrace completion ""`:                                "bash\nzsh\nfish\n",
		`rhotrace predict fringe.toml --turn step.d`:            "step.dark.lasts=\n",
		`rhotrace predict fringe.toml --turn = step.d`:          "step.dark.lasts=\n",
		`rhotrace predict fringe.toml --turn step.dark.lasts =`: "\n", // the value is the user's
		`rhotrace predict fringe.toml -o ""`:                    "\n", // bash goes on with files
		`rhotrace predict --turn a = "'1 Hz'" fringe.toml --js`: "--json\n",
	} {
		script := `rhotrace() { ` + asCommand + `=1 "` + os.Args[0] + `" "$@"; }
			eval "$(rhotrace completion bash)"
			COMP_WORDS=(` + words + `)
			COMP_CWORD=$((${#COMP_WORDS[@]} - 1))
			_rhotrace_complete
			printf '%s\n' "${COMPREPLY[@]}"`
		var errOut bytes.Buffer
		command := exec.Command("bash", "-c", script)
		command.Stderr = &errOut
		out, err := command.Output()
		require.NoError(t, err, "%s", errOut.String())
		assert.Equal(t, want, string(out), words)
		assert.Empty(t, errOut.String(), words)
	}
}
