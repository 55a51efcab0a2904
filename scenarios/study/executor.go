package study

import (
	"runtime"
	"sync"
	"sync/atomic"
)

// Executor runs the regions of a window on several cores. It implements
// des.Executor: which worker runs what never shows in a result, because regions
// share nothing while a window runs. Close it when the run is over.
type Executor struct {
	workers int
	do      func(int)
	n       int32
	next    atomic.Int32
	left    atomic.Int32
	round   atomic.Uint32
	closed  atomic.Bool
	wake    []chan struct{}
	asleep  []atomic.Bool
	wg      sync.WaitGroup
}

// spins is how often a worker looks for work before it sleeps.
const spins = 2000

// NewExecutor starts cores-1 workers beside the caller; cores below 2 start
// none.
func NewExecutor(cores int) *Executor {
	e := &Executor{workers: max(cores, 1) - 1}
	e.wake = make([]chan struct{}, e.workers)
	e.asleep = make([]atomic.Bool, e.workers)
	for w := range e.workers {
		e.wake[w] = make(chan struct{}, 1)
		e.wg.Go(func() { e.work(w) })
	}
	return e
}

// Each implements des.Executor.
func (e *Executor) Each(n int, do func(i int)) {
	if n < 2 || e.workers == 0 {
		for i := range n {
			do(i)
		}
		return
	}
	e.do, e.n = do, int32(n)
	e.left.Store(int32(e.workers))
	e.next.Store(0)
	e.round.Add(1)
	for w := range e.workers {
		if e.asleep[w].Swap(false) {
			e.wake[w] <- struct{}{}
		}
	}
	e.take()
	for e.left.Load() != 0 {
		runtime.Gosched()
	}
}

// take runs regions until none is left.
func (e *Executor) take() {
	for i := e.next.Add(1) - 1; i < e.n; i = e.next.Add(1) - 1 {
		e.do(int(i))
	}
}

// work takes part in every round.
func (e *Executor) work(w int) {
	seen := uint32(0)
	for {
		for i := 0; e.round.Load() == seen; i++ {
			if i < spins {
				runtime.Gosched()
				continue
			}
			e.asleep[w].Store(true)
			if e.round.Load() != seen && e.asleep[w].Swap(false) {
				break
			}
			<-e.wake[w]
		}
		seen++
		if e.closed.Load() {
			return
		}
		e.take()
		e.left.Add(-1)
	}
}

// Close ends the workers. The executor must be idle.
func (e *Executor) Close() {
	e.closed.Store(true)
	e.round.Add(1)
	for w := range e.workers {
		if e.asleep[w].Swap(false) {
			e.wake[w] <- struct{}{}
		}
	}
	e.wg.Wait()
}
