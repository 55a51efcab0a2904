package central

import (
	"slices"

	"ferrule/controller/path"
	"ferrule/des"
	"ferrule/nodes"
)

// Controller decides for the whole network at one site, whose agent it is too.
type Controller struct {
	k  *known
	el *Element

	circuits []circuit
	fibres   []fibre
	sites    []site
	drains   []drain
	watched  []watched         // as in Config.Policies
	free     []int64           // slots it believes free on each fibre, each way
	spare    []path.Set        // whole channels it believes free on each fibre
	ways     []way             // by way
	tables   []*nodes.Table    // last sent to each site; nil: unknown
	version  int32             // of the last table
	finder   *path.Finder      // over fibres
	scratch  scratch           // of searches
	commands commands          // not answered yet
	gathered []nodes.CircuitID // hit by a fault that is still being reported
	owed     []owed            // given up, to be repeated when a fibre is lit
	tasks    []*task           // in hand, by number; nil: free
	number   int64             // of the last task or timer
	jobs     jobs              // waiting to be decided
	steps    []step            // orders, those known in advance first
	streams  []stream          // circuit demand; the last is that of single orders
	requests []request         // slots held without packets
	unused   []int32           // free places in requests
	classes  []nodes.ClassID   // see carriedClasses; nil: not up to date

	tablesQueued bool // a job for new tables waits
	tablesSent   int  // tables not confirmed yet
	changed      bool // steps may have become possible
	undoing      bool // a step has failed, and those that belong to it are taken back
	deaf         bool // a command has gone without an answer since all sites were last asked

	x   nodes.Local // during Handle only
	now des.Time    // during Handle only
}

// Clone implements nodes.ControlAgent.
func (c *Controller) Clone() nodes.ControlAgent { return c.clone() }

// Handle implements nodes.ControlAgent.
func (c *Controller) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	c.x, c.now = x, now
	switch m.Op {
	case nodes.OpOrder:
		c.ordered(&m)
	case opAnswer:
		c.answered(&m)
	case opOverdue:
		c.overdue()
	case opAlarm:
		c.hear(&m)
		c.circuitAlarm(&m)
	case opFibreAlarm:
		c.hear(&m)
		c.fibreAlarm(&m)
	case opEquipment:
		c.hear(&m)
		c.equipmentAlarm(&m)
	case opComputed:
		c.computed()
	case opUnplaced:
		c.unplaced(m.Circuit, m.N)
	case opPollAll:
		c.poll()
	case opGathered:
		c.gatherEnds()
	case opAfter:
		c.afterwards(m.N, m.A)
	case opSweep:
		c.sweep(m.Way, m.A)
	case opWhole:
		c.whole(m.Circuit, m.N)
	case opArrival:
		c.arrival(int(m.N))
	case opExpire:
		c.expire(m.N, m.A)
	default:
		c.el.Handle(x, now, m)
	}
	c.checkDrains()
	c.wake()
	c.x = nil
}

// hear confirms an alarm.
func (c *Controller) hear(m *nodes.Message) {
	c.x.Send(m.From, nodes.Message{Op: opHeard, A: m.A})
}

// jobKind says what is to be decided.
type jobKind uint8

// Kinds of job.
const (
	jobTables  jobKind = iota // what the tables should be
	jobTask                   // the next thing about a task
	jobRequest                // a request of a stream
)

// Ranks of jobs: what follows a failure goes first.
const (
	rankTables  uint8 = iota // tables after a failure
	rankRestore              // restorations, among themselves by importance
	rankOrder                // everything else, as it comes
)

// job is one thing to decide.
type job struct {
	kind   jobKind
	rank   uint8
	task   int32  // jobTask
	stream int32  // jobRequest
	step   int32  // jobRequest: of the order behind it, or None
	number uint64 // of the task, or of the request in its stream
	hold   des.Time
}

// settles says whether the network is unsettled while j waits.
func (j job) settles() bool { return j.kind != jobRequest }

// jobs is what waits to be decided, next first from head on.
type jobs struct {
	list []job
	head int
	now  job  // in hand
	busy bool // one is in hand
}

// enqueue adds a job behind those that go before it, and begins it when
// nothing else is in hand.
func (c *Controller) enqueue(j job) {
	q := &c.jobs
	i := len(q.list)
	for i > q.head && c.before(&j, &q.list[i-1]) {
		i--
	}
	q.list = slices.Insert(q.list, i, j)
	if j.settles() {
		c.x.Pending(1)
	}
	if !q.busy {
		c.nextJob()
	}
}

// before says whether job a goes before job b, which was there first.
func (c *Controller) before(a, b *job) bool {
	if a.rank != b.rank {
		return a.rank < b.rank
	}
	if a.rank != rankRestore {
		return false
	}
	return c.sooner(c.tasks[a.task].circuit, c.tasks[b.task].circuit)
}

// nextJob begins the next job. With no time to compute it is decided at once;
// what it brings forth is decided after it.
func (c *Controller) nextJob() {
	q := &c.jobs
	for q.head < len(q.list) {
		q.now, q.busy = q.list[q.head], true
		if q.head++; q.head == len(q.list) {
			q.list, q.head = q.list[:0], 0
		} else if q.head > 64 && q.head > len(q.list)/2 {
			q.list, q.head = slices.Delete(q.list, 0, q.head), 0
		}
		if c.k.cfg.Compute > 0 {
			later(c.x, c.now+c.k.cfg.Compute, nodes.Message{Op: opComputed})
			return
		}
		c.decide()
	}
}

// computed decides the job in hand, whose time is over, and begins the next.
func (c *Controller) computed() {
	c.decide()
	c.nextJob()
}

// decide decides the job in hand on the picture as it is now. Jobs enqueued
// meanwhile wait.
func (c *Controller) decide() {
	switch j := c.jobs.now; j.kind {
	case jobTables:
		c.tablesQueued = false
		c.renewTables()
	case jobTask:
		if t := c.tasks[j.task]; t != nil && uint64(t.number) == j.number {
			c.run(j.task)
		}
	case jobRequest:
		c.admit(&j)
	default:
		panic("central: unknown kind of job")
	}
	c.jobs.busy = false
	if c.jobs.now.settles() {
		c.x.Pending(-1)
	}
}
