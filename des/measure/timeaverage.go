package measure

import (
	"math"

	"ferrule/des"
)

// TimeAverage integrates an integer level over time, exactly: bytes in a
// queue, circuits in use. It holds no pointer. The zero value starts at time 0
// with level 0.
type TimeAverage struct {
	area  des.Sum
	start des.Time
	last  des.Time
	level int64
	peak  int64
}

// Set makes the level what it is from now on. It panics if now is earlier than
// the call before or level is negative.
func (t *TimeAverage) Set(now des.Time, level int64) {
	if now < t.last || level < 0 {
		panic("measure: level set back in time or below zero")
	}
	t.area.AddProduct(uint64(t.level), uint64(now-t.last))
	t.last = now
	t.level = level
	t.peak = max(t.peak, level)
}

// Level returns the level that was set last.
func (t *TimeAverage) Level() int64 { return t.level }

// Peak returns the greatest level since the start.
func (t *TimeAverage) Peak() int64 { return t.peak }

// Restart begins a new average at now, such as after a warm-up, with the level
// as it stands. It panics if now is earlier than the last call of Set.
func (t *TimeAverage) Restart(now des.Time) {
	if now < t.last {
		panic("measure: average restarted back in time")
	}
	*t = TimeAverage{start: now, last: now, level: t.level, peak: t.level}
}

// Area returns the integral of the level from the start to now, in units of
// level times picoseconds. It panics if now is earlier than the last call of Set.
func (t *TimeAverage) Area(now des.Time) des.Sum {
	if now < t.last {
		panic("measure: average asked for back in time")
	}
	a := t.area
	a.AddProduct(uint64(t.level), uint64(now-t.last))
	return a
}

// Mean returns the average level from the start to now; NaN if no time has
// passed. It panics if now is earlier than the last call of Set.
func (t *TimeAverage) Mean(now des.Time) float64 {
	if now == t.start {
		return math.NaN()
	}
	return t.Area(now).Float() / float64(now-t.start)
}
