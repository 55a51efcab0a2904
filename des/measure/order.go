package measure

// Order counts packets that arrive after one sent later. A packet is reordered
// if its number is below the next expected; otherwise the next expected becomes
// its number plus one. A packet is 3-reordered if the three packets that
// arrived just before it all have greater numbers, which is what makes a
// receiver send three duplicate acknowledgements. Duplicates must have been
// taken out. It holds no pointer. The zero value expects number 0.
//
// Source: RFC 4737, sections 3.3, 4.1 and 5.2 to 5.4 (2006).
type Order struct {
	Received  uint64
	Reordered uint64
	Three     uint64 // how many of Reordered are 3-reordered
	next      uint64
	before    [3]uint32 // the last three arrivals, the newest first
}

// Add takes the packet that arrived and reports whether it is reordered.
func (o *Order) Add(seq uint32) (reordered bool) {
	o.Received++
	if reordered = uint64(seq) < o.next; !reordered {
		o.next = uint64(seq) + 1
	} else {
		o.Reordered++
		if o.Received > 3 && min(o.before[0], o.before[1], o.before[2]) > seq {
			o.Three++
		}
	}
	o.before = [3]uint32{seq, o.before[0], o.before[1]}
	return reordered
}
