package main

import (
	"strings"
	"sync"
	"testing"
	"testing/synctest"
	"time"

	"github.com/stretchr/testify/assert"
)

// screen is one line of a terminal.
type screen struct {
	mu     sync.Mutex
	cells  []rune
	column int
}

func (s *screen) Write(p []byte) (int, error) {
	s.mu.Lock()
	defer s.mu.Unlock()
	for _, c := range string(p) {
		if c == '\r' {
			s.column = 0
			continue
		}
		for len(s.cells) <= s.column {
			s.cells = append(s.cells, ' ')
		}
		s.cells[s.column] = c
		s.column++
	}
	return len(p), nil
}

func (s *screen) shows() string {
	s.mu.Lock()
	defer s.mu.Unlock()
	return strings.TrimRight(string(s.cells), " ")
}

// TestProgress runs on a clock of its own.
func TestProgress(t *testing.T) {
	synctest.Test(t, func(t *testing.T) {
		var s screen
		p := startProgress(&s, "points")
		time.Sleep(900 * time.Millisecond)
		synctest.Wait()
		assert.Empty(t, s.shows(), "nothing in the first second")
		time.Sleep(200 * time.Millisecond)
		synctest.Wait()
		assert.Equal(t, "working", s.shows())
		p.report(1, 1000)
		p.report(50, 1000)
		p.report(49, 1000) // late news of another goroutine
		time.Sleep(900 * time.Millisecond)
		synctest.Wait()
		assert.Equal(t, "50 of 1000 points, about 38s left", s.shows(), "20 points a second... 950 to go after 2 s")
		time.Sleep(8 * time.Second)
		p.report(1000, 1000)
		time.Sleep(time.Second)
		synctest.Wait()
		assert.Equal(t, "1000 of 1000 points, about 0s left", s.shows())
		p.stop()
		assert.Empty(t, s.shows(), "the line is gone")
		assert.Zero(t, s.column)
	})
	synctest.Test(t, func(t *testing.T) {
		var s screen
		p := startProgress(&s, "points")
		p.report(10, 10)
		p.stop()
		assert.Empty(t, s.cells, "a short run leaves the terminal alone")
	})
}
