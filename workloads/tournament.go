package workloads

import "ferrule/des"

// A tournament finds the earliest of a fixed number of flows, the lowest
// number first among equals. Its nodes form a complete binary tree: node i is
// the earlier of nodes 2i and 2i+1, the flows are the leaves, node 1 the
// winner. A flow that sends moves up one path, by choices without a branch.
type tournament struct {
	due []des.Time
	id  []uint32
}

// newTournament returns the tournament of flows due at the given instants.
func newTournament(due []des.Time) tournament {
	n := 2
	for n < len(due) {
		n *= 2
	}
	t := tournament{make([]des.Time, 2*n), make([]uint32, 2*n)}
	for i := range n {
		t.due[n+i], t.id[n+i] = des.Never, uint32(i)
		if i < len(due) {
			t.due[n+i] = due[i]
		}
	}
	for i := n - 1; i > 0; i-- {
		w := 2 * i
		if t.due[w+1] < t.due[w] {
			w++
		}
		t.due[i], t.id[i] = t.due[w], t.id[w]
	}
	return t
}

// next reports when the earliest flow is due; des.Never if there is none.
func (t *tournament) next() des.Time { return t.due[1] }

// first returns the earliest flow and when it is due.
func (t *tournament) first() (id uint32, due des.Time) { return t.id[1], t.due[1] }

// of reports when flow id is due.
func (t *tournament) of(id uint32) des.Time { return t.due[len(t.due)/2+int(id)] }

// set changes when flow id is due.
func (t *tournament) set(id uint32, due des.Time) {
	dues, ids := t.due, t.id[:len(t.due)]
	i := len(dues)/2 + int(id)
	dues[i] = due
	for i > 1 && i < len(dues) {
		other, o := dues[i^1], ids[i^1]
		// A right child loses to an equal left one.
		late := due - des.Time(1-i&1)
		if other <= late {
			due = other
		}
		if other <= late {
			id = o
		}
		i >>= 1
		dues[i], ids[i] = due, id
	}
}

// flows reports how many flows the tournament has room for.
func (t *tournament) flows() int { return len(t.due) / 2 }

// grow doubles the room.
func (t *tournament) grow() {
	due := make([]des.Time, 2*t.flows())
	for i := copy(due, t.due[t.flows():]); i < len(due); i++ {
		due[i] = des.Never
	}
	*t = newTournament(due)
}

// clone returns a copy that shares nothing.
func (t *tournament) clone() tournament {
	return tournament{append([]des.Time(nil), t.due...), append([]uint32(nil), t.id...)}
}
