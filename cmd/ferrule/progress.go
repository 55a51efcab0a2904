package main

import (
	"fmt"
	"strings"
	"sync"
	"time"
)

const (
	barWidth      = 30
	progressEvery = 100 * time.Millisecond
)

// progress draws one line on a terminal and nothing anywhere else.
type progress struct {
	env Env
	on  bool

	mu struct {
		sync.Mutex
		last time.Time
	}
}

func newProgress(env Env) *progress { return &progress{env: env, on: env.IsTTY(env.ErrOut)} }

// show draws how much of total is done, ten times a second at most. It may be
// called from any goroutine.
func (p *progress) show(done, total float64) {
	if !p.on || !(total > 0) {
		return
	}
	p.mu.Lock()
	defer p.mu.Unlock()
	now := time.Now()
	if now.Sub(p.mu.last) < progressEvery {
		return
	}
	p.mu.last = now
	share := min(max(done/total, 0), 1)
	n := int(share * barWidth)
	fmt.Fprintf(p.env.ErrOut, "\r[%s%s] %3.0f %%", strings.Repeat("=", n), strings.Repeat(" ", barWidth-n), 100*share)
}

// clear wipes the line.
func (p *progress) clear() {
	if p.on {
		fmt.Fprintf(p.env.ErrOut, "\r%s\r", strings.Repeat(" ", barWidth+8))
	}
}
