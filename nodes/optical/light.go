package optical

import (
	"ferrule/des"
	"ferrule/nodes"
)

// Span is a stretch of time in which one place of one fibre passes no light.
// To is des.Never while it lasts.
type Span struct {
	Place des.Time // light from the fibre's first end to the place
	From  des.Time
	To    des.Time
	Dirs  Dirs // which directions are dark
}

// Dirs is a set of directions of a fibre.
type Dirs uint8

// Sets of directions.
const (
	DirOut  Dirs = 1 << nodes.Out
	DirBack Dirs = 1 << nodes.Back
	DirBoth      = DirOut | DirBack
)

// Has reports whether d is in the set.
func (s Dirs) Has(d nodes.Direction) bool { return s>>d&1 != 0 }

// Light is what happened to each fibre: the spans of darkness, in the order in
// which they began. It changes only at outside acts; between them every region
// may read it.
type Light struct {
	spans [][]Span
}

// NewLight returns the history of so many fibres, all lit.
func NewLight(fibres int) *Light { return &Light{spans: make([][]Span, fibres)} }

// Cut darkens the given directions of fibre f at the given place from now on
// and reports the number of the span. A fibre may be cut at several places.
func (l *Light) Cut(f int, place, now des.Time, dirs Dirs) (span int) {
	l.spans[f] = append(l.spans[f], Span{Place: place, From: now, To: des.Never, Dirs: dirs})
	return len(l.spans[f]) - 1
}

// Repair ends every span of fibre f that lasts; it reports their numbers.
func (l *Light) Repair(f int, now des.Time) (spans []int) {
	return l.End(f, now, func(int, Span) bool { return true })
}

// End ends the spans of fibre f that last and for which which holds; it reports
// their numbers.
func (l *Light) End(f int, now des.Time, which func(i int, s Span) bool) (spans []int) {
	for i := range l.spans[f] {
		if s := &l.spans[f][i]; s.To == des.Never && which(i, *s) {
			s.To = now
			spans = append(spans, i)
		}
	}
	return spans
}

// Spans returns the history of fibre f; the caller must not change it.
func (l *Light) Spans(f int) []Span { return l.spans[f] }

// Dark reports whether some place of fibre f is dark, in some direction, at
// instant t.
func (l *Light) Dark(f int, t des.Time) bool {
	for _, s := range l.spans[f] {
		if s.From <= t && t < s.To {
			return true
		}
	}
	return false
}

// DarkTowards is Dark for one direction.
func (l *Light) DarkTowards(f int, t des.Time, d nodes.Direction) bool {
	for _, s := range l.spans[f] {
		if s.From <= t && t < s.To && s.Dirs.Has(d) {
			return true
		}
	}
	return false
}

// Clone returns a copy that shares nothing.
func (l *Light) Clone() *Light {
	c := NewLight(len(l.spans))
	for i, s := range l.spans {
		c.spans[i] = append([]Span(nil), s...)
	}
	return c
}
