package optical

import (
	"fmt"
	"slices"

	"ferrule/nodes"
)

// Holder is who owns a slot or a channel: one incarnation of a circuit.
// Circuit may be any number that is not None; whoever commands the
// cross-connect gives it meaning.
type Holder struct {
	Circuit     nodes.CircuitID
	Incarnation int32
}

// nobody owns what is free.
var nobody = Holder{Circuit: nodes.None}

// CrossConnect is the ownership of everything one site sends into: on each
// fibre that leaves it, the tributary slots of its lit channels and the
// channels without trunk equipment, in the direction away from the site. The
// other direction of a fibre belongs to the cross-connect at its other end.
//
// Channels 0 to Lit-1 of a fibre are cut into slots and cannot be owned whole.
type CrossConnect struct {
	site  nodes.SiteID
	ports []port // in order of fibre id
}

// port is the sending side of one fibre.
type port struct {
	fibre    nodes.FibreID
	lit      int
	free     int      // slots that nobody owns
	low      int      // no slot below it is free
	slots    []Holder // owner of each tributary slot
	channels []Holder // owner of each channel from number lit on
}

// NewCrossConnect returns the cross-connect of site s with nothing owned.
func NewCrossConnect(p *nodes.Plant, s nodes.SiteID) *CrossConnect {
	x := &CrossConnect{site: s}
	for i := range p.Fibres {
		f := &p.Fibres[i]
		if f.Ends[0] != s && f.Ends[1] != s {
			continue
		}
		x.ports = append(x.ports, port{
			fibre: nodes.FibreID(i), lit: f.Lit, free: f.Slots,
			slots:    slices.Repeat([]Holder{nobody}, f.Slots),
			channels: slices.Repeat([]Holder{nobody}, max(0, f.Channels-f.Lit)),
		})
	}
	return x
}

// Site reports where x stands.
func (x *CrossConnect) Site() nodes.SiteID { return x.site }

// at finds the sending side of f. It panics when f does not leave the site.
func (x *CrossConnect) at(f nodes.FibreID) *port {
	for i := range x.ports {
		if x.ports[i].fibre == f {
			return &x.ports[i]
		}
	}
	panic(fmt.Sprintf("optical: fibre %d does not leave site %d", f, x.site))
}

// Assign makes h own exactly n slots of the sending side of f: the lowest free
// ones are added, or its highest are given up. It reports false, and changes
// nothing, when too few are free. The time complexity is linear in the slots
// of the fibre.
func (x *CrossConnect) Assign(f nodes.FibreID, h Holder, n int) bool {
	p := x.at(f)
	have := 0
	if p.free < len(p.slots) {
		have = count(p.slots, h)
	}
	if n-have > p.free {
		return false
	}
	switch {
	case n > have:
		p.take(h, n-have)
	case n < have:
		p.give(h, have-n)
	}
	return true
}

// take gives h the n lowest free slots; there are that many.
func (p *port) take(h Holder, n int) {
	p.free -= n
	i := p.low
	for ; n > 0; i++ {
		if p.slots[i] == nobody {
			p.slots[i] = h
			n--
		}
	}
	p.low = i
}

// give frees the n highest slots of h; it has that many.
func (p *port) give(h Holder, n int) {
	p.free += n
	for i := len(p.slots) - 1; n > 0; i-- {
		if p.slots[i] == h {
			p.slots[i] = nobody
			p.low = min(p.low, i)
			n--
		}
	}
}

// AssignChannel makes h own channel number ch of the sending side of f. It
// reports false, and changes nothing, when the channel is cut into slots, does
// not exist, or is owned by another.
func (x *CrossConnect) AssignChannel(f nodes.FibreID, h Holder, ch int) bool {
	p := x.at(f)
	i := ch - p.lit
	if i < 0 || i >= len(p.channels) || p.channels[i] != nobody && p.channels[i] != h {
		return false
	}
	p.channels[i] = h
	return true
}

// Release frees all that h owns on the sending side of f.
func (x *CrossConnect) Release(f nodes.FibreID, h Holder) {
	p := x.at(f)
	if n := count(p.slots, h); n > 0 {
		p.give(h, n)
	}
	for i := range p.channels {
		if p.channels[i] == h {
			p.channels[i] = nobody
		}
	}
}

// FreeSlots reports how many slots of the sending side of f nobody owns.
func (x *CrossConnect) FreeSlots(f nodes.FibreID) int { return x.at(f).free }

// Held reports how many slots and how many channels h owns on the sending side
// of f.
func (x *CrossConnect) Held(f nodes.FibreID, h Holder) (slots, channels int) {
	p := x.at(f)
	return count(p.slots, h), count(p.channels, h)
}

// Channel reports the lowest channel that h owns on the sending side of f, or
// None.
func (x *CrossConnect) Channel(f nodes.FibreID, h Holder) int {
	p := x.at(f)
	if i := slices.Index(p.channels, h); i >= 0 {
		return i + p.lit
	}
	return nodes.None
}

// count reports how often h stands in owners.
func count(owners []Holder, h Holder) (n int) {
	for _, o := range owners {
		if o == h {
			n++
		}
	}
	return n
}

// Ownership is what one holder owns on the sending side of one fibre.
type Ownership struct {
	Fibre    nodes.FibreID
	Holder   Holder
	Slots    int
	Channels []int // numbers of whole channels, ascending
}

// Ownerships lists all that is owned, by fibre, then by holder.
func (x *CrossConnect) Ownerships() []Ownership {
	var all []Ownership
	for i := range x.ports {
		p := &x.ports[i]
		from := len(all)
		for _, h := range p.slots {
			if o := entry(&all, from, p.fibre, h); o != nil {
				o.Slots++
			}
		}
		for i, h := range p.channels {
			if o := entry(&all, from, p.fibre, h); o != nil {
				o.Channels = append(o.Channels, i+p.lit)
			}
		}
		slices.SortFunc(all[from:], func(a, b Ownership) int { return a.Holder.compare(b.Holder) })
	}
	return all
}

// entry finds or adds the entry of h behind from; nil when h is nobody.
func entry(all *[]Ownership, from int, f nodes.FibreID, h Holder) *Ownership {
	if h == nobody {
		return nil
	}
	for i := from; i < len(*all); i++ {
		if (*all)[i].Holder == h {
			return &(*all)[i]
		}
	}
	*all = append(*all, Ownership{Fibre: f, Holder: h})
	return &(*all)[len(*all)-1]
}

// compare orders holders by circuit, then by incarnation.
func (h Holder) compare(o Holder) int {
	if h.Circuit != o.Circuit {
		return int(h.Circuit) - int(o.Circuit)
	}
	return int(h.Incarnation) - int(o.Incarnation)
}

// Audit checks that on every fibre the free and the owned slots add up to all
// slots, and that no free slot stands below where the search for one begins.
// It returns one line for each failure.
func (x *CrossConnect) Audit(p *nodes.Plant) (failures []string) {
	for i := range x.ports {
		q := &x.ports[i]
		f := &p.Fibres[q.fibre]
		free := count(q.slots, nobody)
		if free != q.free || len(q.slots) != f.Slots {
			failures = append(failures, fmt.Sprintf("site %s, fibre %s: %d of %d slots are free, the count says %d of %d",
				p.Sites[x.site].Name, f.Name, free, len(q.slots), q.free, f.Slots))
		}
		if first := slices.Index(q.slots, nobody); first >= 0 && first < q.low {
			failures = append(failures, fmt.Sprintf("site %s, fibre %s: slot %d is free below %d, where the search begins",
				p.Sites[x.site].Name, f.Name, first, q.low))
		}
	}
	return failures
}

// Clone returns a copy that shares nothing with x.
func (x *CrossConnect) Clone() *CrossConnect {
	c := &CrossConnect{site: x.site, ports: slices.Clone(x.ports)}
	for i := range c.ports {
		c.ports[i].slots = slices.Clone(c.ports[i].slots)
		c.ports[i].channels = slices.Clone(c.ports[i].channels)
	}
	return c
}
