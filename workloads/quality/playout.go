package quality

import (
	"errors"
	"fmt"

	"ferrule/des"
)

// PlayoutConfig describes a player of live video. A zero field takes the default
// written beside it; the defaults are common practice, no source.
type PlayoutConfig struct {
	StartUp des.Time // media buffered before the first picture; default 500 ms
	Resume  des.Time // media buffered before playing goes on after a stall; default StartUp
}

// Check fills the defaults and reports every fault at once.
func (c PlayoutConfig) Check() (PlayoutConfig, error) {
	if c.StartUp == 0 {
		c.StartUp = 500 * des.Millisecond
	}
	if c.Resume == 0 {
		c.Resume = c.StartUp
	}
	var faults []error
	if c.StartUp < 0 || c.StartUp > des.Hour {
		faults = append(faults, fmt.Errorf("start-up: %v is not between 0 and 1 h", c.StartUp))
	}
	if c.Resume < 0 || c.Resume > des.Hour {
		faults = append(faults, fmt.Errorf("resume: %v is not between 0 and 1 h", c.Resume))
	}
	return c, errors.Join(faults...)
}

// A Playout judges one flow of video at its player. A packet holds the media of
// the instant of its birth. Playing begins when the configured time of media is
// there, and each packet then has its turn so long after its birth as the first
// one. When the newest media have not come at their turn the picture stalls
// until enough is there again, and all later turns move back by the stall. A
// packet that comes after its turn while newer ones were there is skipped: it is
// lost to the viewer and stalls nothing.
type Playout struct {
	cfg    PlayoutConfig
	state  playing
	delay  des.Time // from birth to turn, when playing
	from   des.Time // birth of the oldest packet waiting, when not playing
	halted des.Time // when the stall began
	newest des.Time // greatest birth so far
	report PlayoutReport
}

// playing is the state of a player.
type playing uint8

const (
	idle     playing = iota // nothing has come
	filling                 // before the first picture
	running                 //
	stalling                // picture stands still
)

// PlayoutReport is what a [Playout] found.
type PlayoutReport struct {
	Packets uint64   // arrived
	Skipped uint64   // came after their turn, while newer ones were there
	Started bool     // whether a picture was seen
	StartUp des.Time // from the birth of the first packet to the first picture
	Stalls  uint64
	Stalled des.Time // sum of the stalls
	Longest des.Time // stall
	Delay   des.Time // from birth to picture at the end
}

// NewPlayout returns a player that has seen nothing, or the faults of c.
func NewPlayout(c PlayoutConfig) (Playout, error) {
	c, err := c.Check()
	return Playout{cfg: c}, err
}

// Arrive takes a packet born and arrived at the given instants. Arrivals come
// in order of at, which is not before born.
func (p *Playout) Arrive(born, at des.Time) {
	p.report.Packets++
	fresh := p.state == idle || born >= p.newest
	p.newest = max(p.newest, born)
	switch p.state {
	case idle:
		p.state, p.from = filling, born
	case filling:
		p.from = min(p.from, born)
	case running:
		if at <= born+p.delay {
			return
		}
		if !fresh {
			p.report.Skipped++
			return
		}
		p.state, p.from, p.halted = stalling, born, born+p.delay
	case stalling:
		if born < p.from {
			p.report.Skipped++ // the picture stands at a newer one
			return
		}
	default:
		panic(fmt.Sprintf("quality: player in state %d", p.state))
	}
	p.resume(at)
}

// resume begins or goes on playing at the instant at if enough is there.
func (p *Playout) resume(at des.Time) {
	if p.state == filling {
		if p.newest-p.from < p.cfg.StartUp {
			return
		}
		p.report.Started, p.report.StartUp = true, at-p.from
	} else {
		if p.newest-p.from < p.cfg.Resume {
			return
		}
		p.stall(at)
	}
	p.state, p.delay = running, at-p.from
}

// stall counts the stall that ends at the instant at.
func (p *Playout) stall(at des.Time) {
	lasted := at - p.halted
	p.report.Stalls++
	p.report.Stalled += lasted
	p.report.Longest = max(p.report.Longest, lasted)
}

// Finish returns what was found if watching ends at the instant at, not before
// the last arrival: a stall under way ends there. Media that did not come at
// the very end are not missed. It changes nothing.
func (p *Playout) Finish(at des.Time) PlayoutReport {
	c := *p
	if c.state == stalling && at > c.halted {
		c.stall(at)
	}
	c.report.Delay = c.delay
	return c.report
}
