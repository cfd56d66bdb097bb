package main

import (
	"fmt"
	"io"
	"strings"
	"sync"
	"sync/atomic"
	"time"
)

// progress is a line on a terminal that says how far a long run has come. It
// appears after a second, is rewritten in place and is gone in the end.
type progress struct {
	w           io.Writer
	what        string // of what there are so and so many
	done, total atomic.Int64
	start       time.Time
	width       int // of the longest line so far
	quit        chan struct{}
	wait        sync.WaitGroup
}

// When the line appears, and how often it is rewritten.
const (
	patience = time.Second
	rhythm   = 200 * time.Millisecond
)

func startProgress(w io.Writer, what string) *progress {
	p := &progress{w: w, what: what, start: time.Now(), quit: make(chan struct{})}
	p.wait.Go(func() { p.show(patience, rhythm) })
	return p
}

// report takes how much is done; any goroutine may call it.
func (p *progress) report(done, total int) {
	p.total.Store(int64(total))
	for old := p.done.Load(); int64(done) > old && !p.done.CompareAndSwap(old, int64(done)); old = p.done.Load() {
	}
}

// show rewrites the line until stop.
func (p *progress) show(after, every time.Duration) {
	next := time.NewTimer(after)
	defer next.Stop()
	for {
		select {
		case <-p.quit:
			if p.width > 0 {
				fmt.Fprintf(p.w, "\r%s\r", strings.Repeat(" ", p.width))
			}
			return
		case <-next.C:
			line := p.line(time.Since(p.start))
			p.width = max(p.width, len(line))
			fmt.Fprintf(p.w, "\r%-*s", p.width, line)
			next.Reset(every)
		}
	}
}

// line is the text after that much time.
func (p *progress) line(passed time.Duration) string {
	done, total := p.done.Load(), p.total.Load()
	if total == 0 {
		return "working"
	}
	text := fmt.Sprintf("%d of %d %s", done, total, p.what)
	if done == 0 {
		return text
	}
	left := time.Duration(float64(passed) * float64(total-done) / float64(done))
	return text + ", about " + left.Round(time.Second).String() + " left"
}

// stop takes the line away.
func (p *progress) stop() {
	close(p.quit)
	p.wait.Wait()
}
