package study

import (
	"runtime"
	"sync/atomic"
)

// Executor spreads the regions of one run over cores. It implements
// des.Executor: its workers live as long as it does, look out for work for a
// moment after each window and then sleep until they are called. Each core has
// its share, every so-manyth call, so that a region mostly stays with the core
// whose cache holds it, and who is done helps the others. Who does what is so
// left to chance, and nothing can depend on it: Each returns when every call has
// returned, and calls share no state.
//
// An Executor belongs to one run at a time.
type Executor struct {
	workers []*worker // beside the caller
	do      func(i int)
	n       int64
	shares  []share // of the caller, then of each worker
}

// share is the next call of one core's share; a share has a cache line of its own.
type share struct {
	next atomic.Int64
	_    [56]byte
}

// worker is one goroutine and what it and the caller tell each other.
type worker struct {
	state  atomic.Int32
	asleep atomic.Bool
	wake   chan struct{}
	_      [64]byte
}

// States of a worker. The caller changes a job's fields only while every worker
// is idle; a worker reads them only at work, and it goes to work only if the
// call still stands.
const (
	idle int32 = iota
	called
	working
	dismissed
)

// lookouts is how often an idle worker looks for work before it sleeps, and
// yieldEvery how often between letting others run: some tens of microseconds,
// longer than the caller needs at the edge of a window.
const (
	lookouts   = 1 << 15
	yieldEvery = 1 << 8
)

// NewExecutor starts an executor for the given number of cores, the caller's
// own included; fewer than two start nothing. Close ends it.
func NewExecutor(cores int) *Executor {
	e := &Executor{shares: make([]share, max(cores, 1))}
	for k := 1; k < cores; k++ {
		w := &worker{wake: make(chan struct{}, 1)}
		e.workers = append(e.workers, w)
		go e.serve(w, k)
	}
	return e
}

// Each runs do(0), ..., do(n-1), perhaps at once, and returns when all have
// returned. It allocates nothing.
func (e *Executor) Each(n int, do func(i int)) {
	if n < 2 || len(e.workers) == 0 {
		for i := range n {
			do(i)
		}
		return
	}
	e.do, e.n = do, int64(n)
	for k := range e.shares {
		e.shares[k].next.Store(int64(k))
	}
	helpers := e.workers[:min(len(e.workers), n-1)]
	for _, w := range helpers {
		w.call(called)
	}
	e.work(0)
	for _, w := range helpers {
		if w.state.CompareAndSwap(called, idle) {
			continue // it had not begun, and will not
		}
		for i := 1; w.state.Load() != idle; i++ {
			if i%yieldEvery == 0 {
				runtime.Gosched()
			}
		}
	}
	e.do = nil
}

// Close ends the workers. Each then runs on its caller alone.
func (e *Executor) Close() {
	for _, w := range e.workers {
		w.call(dismissed)
	}
	e.workers = nil
}

// call puts an idle worker into a state and wakes it if it sleeps.
func (w *worker) call(state int32) {
	w.state.Store(state)
	if w.asleep.CompareAndSwap(true, false) {
		w.wake <- struct{}{}
	}
}

// work does what nobody has begun, the share of core k first.
func (e *Executor) work(k int) {
	cores := len(e.shares)
	step := int64(cores)
	for d := range cores {
		s := &e.shares[(k+d)%cores]
		for i := s.next.Add(step) - step; i < e.n; i = s.next.Add(step) - step {
			e.do(int(i))
		}
	}
}

// serve is a worker's life.
func (e *Executor) serve(w *worker, k int) {
	for {
		w.await()
		if w.state.Load() == dismissed {
			return
		}
		if w.state.CompareAndSwap(called, working) {
			e.work(k)
			w.state.Store(idle)
		}
	}
}

// await returns once the worker may have been called.
func (w *worker) await() {
	for i := 1; i <= lookouts; i++ {
		if w.state.Load() != idle {
			return
		}
		if i%yieldEvery == 0 {
			runtime.Gosched()
		}
	}
	w.asleep.Store(true)
	if w.state.Load() != idle && w.asleep.CompareAndSwap(true, false) {
		return // called just before it fell asleep
	}
	<-w.wake
}
