package workloads

import (
	"fmt"
	"math"

	"ferrule/des"
)

// spellKind says which law a spell follows.
type spellKind uint8

const (
	exponentialSpell spellKind = iota
	geometricSpell             // a whole number of units, one or more
	paretoSpell                // of shape alpha
)

// A spell is the law of how long a source stays in one of two states. Times are
// in ps.
type spell struct {
	kind  spellKind
	mean  float64
	alpha float64 // above 1
	unit  float64 // of which mean is at least one
}

// draw returns the length of a whole spell, at least 1 ps, for u uniform in
// (0, 1).
func (s *spell) draw(u float64) des.Time {
	switch s.kind {
	case exponentialSpell:
		return spellOf(-s.mean * math.Log(u))
	case geometricSpell:
		return spellOf(s.unit * (1 + s.more(u)))
	case paretoSpell:
		return spellOf(s.mean * (s.alpha - 1) / s.alpha * math.Pow(u, -1/s.alpha))
	default:
		panic(fmt.Sprintf("workloads: spell %d", s.kind))
	}
}

// more returns how many units follow one unit, for u uniform in (0, 1).
func (s *spell) more(u float64) float64 {
	if s.mean <= s.unit {
		return 0
	}
	return math.Floor(math.Log(u) / math.Log1p(-s.unit/s.mean))
}

// left returns what is left of a spell that is met at a random instant, for u
// uniform in (0, 1), except what is left of a unit of a geometric one.
//
// Source: the equilibrium law of renewal theory, D. Cox, Renewal Theory (1962):
// the density at x is the chance of a spell longer than x, over the mean.
func (s *spell) left(u float64) des.Time {
	switch s.kind {
	case exponentialSpell:
		return spellOf(-s.mean * math.Log(u))
	case geometricSpell:
		return des.Time(min(longest, s.unit*s.more(u)))
	case paretoSpell:
		least := s.mean * (s.alpha - 1) / s.alpha
		if x := s.mean * u; x < least {
			return spellOf(x)
		}
		return spellOf(least * math.Pow(s.alpha*(1-u), -1/(s.alpha-1)))
	default:
		panic(fmt.Sprintf("workloads: spell %d", s.kind))
	}
}

// spellOf rounds x to whole ps, at least one.
func spellOf(x float64) des.Time { return des.Time(max(1, min(longest, x+0.5))) }
