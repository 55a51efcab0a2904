package des

// Dated is what an Agenda holds: a value with an instant and a total order
// among the values of one instant.
type Dated[T any] interface {
	// When is the instant.
	When() Time
	// Before orders the values of one instant. Of two different values exactly
	// one is before the other.
	Before(o *T) bool
}

// Agenda keeps dated values, earliest first: a binary heap of values, no
// closures, so that it can be copied. The zero Agenda is empty and ready.
type Agenda[T any, P interface {
	*T
	Dated[T]
}] struct {
	heap []T
}

// Len is the number of values.
func (a *Agenda[T, P]) Len() int { return len(a.heap) }

// Next reports when the earliest value is due, or Never.
func (a *Agenda[T, P]) Next() Time {
	if len(a.heap) == 0 {
		return Never
	}
	return P(&a.heap[0]).When()
}

func (a *Agenda[T, P]) before(i, j int) bool {
	x, y := P(&a.heap[i]), P(&a.heap[j])
	if x.When() != y.When() {
		return x.When() < y.When()
	}
	return x.Before(&a.heap[j])
}

// Put adds v.
func (a *Agenda[T, P]) Put(v T) {
	a.heap = append(a.heap, v)
	for i := len(a.heap) - 1; i > 0; {
		up := (i - 1) / 2
		if !a.before(i, up) {
			return
		}
		a.heap[i], a.heap[up] = a.heap[up], a.heap[i]
		i = up
	}
}

// Take removes and returns the earliest value. It panics on an empty agenda.
func (a *Agenda[T, P]) Take() T {
	v := a.heap[0]
	last := len(a.heap) - 1
	a.heap[0] = a.heap[last]
	var zero T
	a.heap[last] = zero
	a.heap = a.heap[:last]
	for i := 0; ; {
		least := i
		for c := 2*i + 1; c <= 2*i+2 && c < last; c++ {
			if a.before(c, least) {
				least = c
			}
		}
		if least == i {
			return v
		}
		a.heap[i], a.heap[least] = a.heap[least], a.heap[i]
		i = least
	}
}

// Each calls f for every value, in no order that means anything.
func (a *Agenda[T, P]) Each(f func(v *T)) {
	for i := range a.heap {
		f(&a.heap[i])
	}
}

// Clone returns a copy; values are copied as they are.
func (a *Agenda[T, P]) Clone() Agenda[T, P] {
	return Agenda[T, P]{heap: append([]T(nil), a.heap...)}
}
