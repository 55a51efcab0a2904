package quality

// run is how many seconds of one kind in a row change the state.
const run = 10

// SeverelyErrored reports whether a second in which so many frames were sent and
// lost is severely errored: more than half are lost. A second in which nothing
// was sent is not.
//
// Source: ITU-T Y.1563, 9 (the default threshold; from memory).
func SeverelyErrored(sent, lost uint64) bool { return 2*lost > sent }

// Availability follows the state of a service second by second. It becomes
// unavailable at the start of ten consecutive severely errored seconds and
// available again at the start of ten consecutive others: both changes are
// dated back to the first of the ten. The zero value is available and has seen
// nothing.
//
// Source: ITU-T Y.1563, 9, from memory; the same rule as in ITU-T G.826.
type Availability struct {
	seconds uint64
	down    bool
	streak  uint64 // seconds in a row that speak against the state
	since   uint64 // second at which the state began
	report  AvailabilityReport
}

// AvailabilityReport is what an [Availability] found. Seconds whose state is not
// decided yet count to the state before them.
type AvailabilityReport struct {
	Seconds     uint64
	Unavailable uint64 // seconds
	Errored     uint64 // severely errored seconds of available time: they count as loss
	Periods     uint64 // of unavailable time
	Down        bool   // the state
	Since       uint64 // the second, from 0, at which the state began
}

// Second takes the next second.
func (a *Availability) Second(severe bool) {
	a.seconds++
	if severe == a.down {
		a.settle(a.streak)
		a.streak = 0
		if a.down {
			a.report.Unavailable++
		}
		return
	}
	if a.streak++; a.streak < run {
		return
	}
	a.down = !a.down
	a.since = a.seconds - run
	a.streak = 0
	if a.down {
		a.report.Periods++
		a.report.Unavailable += run
	}
}

// settle gives n seconds that spoke against the state to the state.
func (a *Availability) settle(n uint64) {
	if a.down {
		a.report.Unavailable += n
	} else {
		a.report.Errored += n
	}
}

// Report returns what was found so far.
func (a *Availability) Report() AvailabilityReport {
	c := *a
	c.settle(c.streak)
	r := c.report
	r.Seconds, r.Down, r.Since = a.seconds, a.down, a.since
	return r
}

// Ratio returns the fraction of the time in which the service was available; ok
// is false when no second was seen.
func (r *AvailabilityReport) Ratio() (ratio float64, ok bool) {
	if r.Seconds == 0 {
		return 0, false
	}
	return float64(r.Seconds-r.Unavailable) / float64(r.Seconds), true
}
