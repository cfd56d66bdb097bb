package main

import (
	"bufio"
	"bytes"
	"context"
	"encoding/json"
	"errors"
	"strings"
	"testing"
	"unicode/utf8"

	"github.com/stretchr/testify/assert"
	"github.com/stretchr/testify/require"

	"rhotrace/validation"
)

func TestVerify(t *testing.T) {
	status, out, errOut := invoke("", "verify")
	require.Equal(t, done, status, errOut)
	assert.Empty(t, errOut)
	lines := strings.Split(strings.TrimSpace(out), "\n")
	count := len(validation.Checks())
	require.Len(t, lines, count+3, "a header, a line for each check, an empty line, the count")
	for i, line := range lines {
		assert.LessOrEqual(t, utf8.RuneCountInString(line), 120)
		if i > 0 && i <= count {
			assert.True(t, strings.HasPrefix(line, "ok "), line)
		}
	}
	assert.Regexp(t, `^[0-9]+ checks passed, 0 failed$`, lines[count+2])

	status, out, errOut = invoke("", "verify", "--json")
	require.Equal(t, done, status, errOut)
	var answer struct {
		Checks []struct {
			Name, Source, Status, Why              string
			Expected, Found, Difference, Tolerance float64
			Passed                                 bool
		}
		Passed, Failed int
	}
	require.NoError(t, json.Unmarshal([]byte(out), &answer))
	assert.Equal(t, count, answer.Passed)
	assert.Zero(t, answer.Failed)
	require.Len(t, answer.Checks, count)
	for _, c := range answer.Checks {
		assert.InDelta(t, c.Expected, c.Found, c.Tolerance, c.Name)
		assert.NotEmpty(t, c.Why)
	}
}

// TestVerifyFails: a wrong value and a check that cannot run are failures.
func TestVerifyFails(t *testing.T) {
	list := validation.Checks()[:3]
	list[1].Expected += 10 * list[1].Tolerance
	list[2].Found = func(context.Context) (float64, error) { return 0, errors.New("no such level") }
	var text bytes.Buffer
	s := &session{out: bufio.NewWriter(&text)}
	err := s.compare(t.Context(), list, false)
	require.NoError(t, s.out.Flush())
	assert.ErrorContains(t, err, "2 of 3 checks failed")
	assert.Contains(t, text.String(), "FAIL "+list[1].Name)
	assert.Contains(t, text.String(), list[1].Why)
	assert.Contains(t, text.String(), "no such level")
	assert.Contains(t, text.String(), "1 checks passed, 2 failed")
}
