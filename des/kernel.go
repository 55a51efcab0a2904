package des

import "fmt"

// Kind is the order of what happens at one instant. It is the middle part of
// the total order (time, kind, stable key, first come first served within a
// process). Keys come from the names of a scenario, so what a plan adds never
// reorders what was there.
type Kind uint8

// Kinds, in their order.
const (
	KindAct     Kind = iota // an outside act: a cut, a repair, an order, a person's click
	KindControl             // a message or a local control appointment
	KindFibre               // an arrival from a fibre
	KindSource              // an arrival from a source
	KindService             // a decision of a server
)

// A Region is a part of the model that only its own events touch while a
// window runs: a site, or several close together.
type Region interface {
	// Next reports when the region next has work to do, or Never.
	Next() Time

	// Run does everything due before end. It may read what is shared and
	// changes only what is its own; what it sends elsewhere waits for the edge.
	Run(end Time)
}

// A Model is a set of regions and what joins them.
type Model interface {
	// Regions returns the regions in their fixed order; it does not change.
	Regions() []Region

	// Lookahead is the least delay between two regions: what one does at t is
	// never felt by another before t + Lookahead. It is positive.
	Lookahead() Time

	// Edge is called alone at the end of each window, and where Advance ends in
	// quiet, once every region has done all that was due before now: it hands
	// over what is under way. It calls touched for each region whose next work
	// may have changed.
	Edge(now Time, touched func(region int))

	// NextAct reports the instant of the earliest outside act, or Never.
	NextAct() Time

	// Act carries out, alone, every outside act of instant now. All regions
	// have done all that was due before now and nothing due at now.
	Act(now Time)

	// MaxWindow bounds the next window's length; Never for no bound.
	MaxWindow() Time
}

// An Executor runs do(0), ..., do(n-1), in any order, perhaps at once, and
// returns when all have returned.
type Executor interface {
	// Each makes the n calls and waits for the last to return.
	Each(n int, do func(i int))
}

// Serial is the Executor that uses only its caller.
type Serial struct{}

// Each implements Executor.
func (Serial) Each(n int, do func(i int)) {
	for i := range n {
		do(i)
	}
}

// A Kernel advances a Model in windows. How long windows are, how regions are
// drawn and what executes them never shows in the model's state: that is the
// model's promise, and tests hold it to it.
type Kernel struct {
	// Window, if positive, replaces the natural length of windows when it is
	// shorter. WindowFunc, if not nil, is asked for each window instead; tests
	// use it for windows of random length.
	Window     Time
	WindowFunc func() Time

	model   Model
	regions []Region
	exec    Executor
	cal     Calendar
	due     []int // regions with work in this window
	end     Time
	runDue  func(i int)
	touched func(r int)
	now     Time
	windows uint64
}

// NewKernel prepares to run m on exec; a nil exec is Serial. It panics if the
// model's lookahead is not positive.
func NewKernel(m Model, exec Executor) *Kernel {
	if m.Lookahead() <= 0 {
		panic(fmt.Sprintf("des: lookahead of %v", m.Lookahead()))
	}
	if exec == nil {
		exec = Serial{}
	}
	k := &Kernel{model: m, regions: m.Regions(), exec: exec}
	k.cal = NewCalendar(len(k.regions))
	k.runDue = func(i int) { k.regions[k.due[i]].Run(k.end) }
	k.touched = func(r int) { k.cal.Set(r, k.regions[r].Next()) }
	k.refresh()
	return k
}

func (k *Kernel) refresh() {
	for r := range k.regions {
		k.touched(r)
	}
}

// Now is the instant up to which everything has been done.
func (k *Kernel) Now() Time { return k.now }

// Windows counts the windows run so far; it depends on their length and is no
// part of any result.
func (k *Kernel) Windows() uint64 { return k.windows }

// Advance does everything due before to, and the outside acts before to. It
// returns early, after a whole window, when stop is not nil and returns true.
func (k *Kernel) Advance(to Time, stop func() bool) {
	for {
		next, _ := k.cal.Min()
		act := k.model.NextAct()
		if min(next, act) >= to {
			if k.now < to {
				k.now = to
				k.model.Edge(to, k.touched)
			}
			return
		}
		if act <= next {
			k.now = act
			k.model.Act(act)
			k.refresh()
			continue
		}
		k.window(next, min(to, act))
		if stop != nil && stop() {
			return
		}
	}
}

// window runs one window from the earliest appointment; it ends at bound at
// the latest.
func (k *Kernel) window(from, bound Time) {
	if k.cal.Stale(from) {
		k.cal.MoveEpoch(from)
	}
	length := min(k.model.Lookahead(), k.model.MaxWindow())
	if k.WindowFunc != nil {
		length = min(length, max(k.WindowFunc(), Picosecond))
	} else if k.Window > 0 {
		length = min(length, k.Window)
	}
	k.end = min(from.Plus(length), bound)
	k.due = k.due[:0]
	for r := range k.regions {
		if k.cal.At(r) < k.end {
			k.due = append(k.due, r)
		}
	}
	k.exec.Each(len(k.due), k.runDue)
	for _, r := range k.due {
		k.touched(r)
	}
	k.now = k.end
	k.windows++
	k.model.Edge(k.end, k.touched)
}
