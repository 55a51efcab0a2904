package packet

import (
	"slices"

	"ferrule/des"
	"ferrule/nodes"
)

// segment moves data up to end.
func (s *Site) segment(end des.Time) {
	ready, last := 0, 0
	for i := range s.inputs {
		if in := &s.inputs[i]; in.ready(end) {
			ready++
			last = i
		}
	}
	switch {
	case ready == 1:
		s.receive(last, end, false)
	case ready > 1:
		for i := range s.inputs {
			if s.inputs[i].ready(end) {
				s.receive(i, end, true)
			}
		}
		s.deliverSorted()
	}
	if before := s.access.before(end); s.srcMin < before {
		s.emit(before)
	}
	if s.hostMin < end {
		s.runHosts(end)
	}
	if s.gateMin < end {
		s.openGates(end)
	}
	for i := range s.ports {
		q := &s.ports[i]
		if len(q.in.arena) > 0 || q.waiting > 0 {
			sent := q.count.sent
			q.segment(s, end)
			if q.count.sent != sent {
				s.dirty = append(s.dirty, q.pipe)
				if q.copy != nil {
					s.dirty = append(s.dirty, q.copy)
				}
			}
		}
	}
}

// receive takes from an input what leaves the forwarding engine before end. It
// only reads the pipe, which its other end may be filling. With sorted, what
// is delivered waits in the sink.
func (s *Site) receive(i int, end des.Time, sorted bool) {
	if s.inputs[i].tail != nil {
		s.receiveCopies(i, end, sorted)
		return
	}
	p, lat, key := s.inputs[i].pipe, s.inputs[i].lat, int32(i)
	mask := uint64(len(p.rbuf) - 1)
	dark := len(p.dark) > 0
	transit := uint64(0)
	for p.head != p.vis {
		k := &p.rbuf[p.head&mask]
		due := k.Due + lat.at(k.Due)
		if due >= end {
			break
		}
		p.head++
		if dark && p.lost(k) {
			s.lose(k, k.Due, LostCut)
			continue
		}
		if lat.varies && k.Seq%64 == 0 {
			s.latencies.Add(uint64(due-k.Due) / 1000)
		}
		h := s.hop[k.Way]
		if h >= hopHeld { // it came back to where its way begins, and is held
			h = s.resolve(k.Way)
		}
		switch {
		case h >= 0 && k.TTL <= 1:
			s.lose(k, due, LostTTL)
		case h >= 0:
			if h >= hopSets {
				h = s.choose(k, h)
			}
			a := s.ports[h].in.put(k, key)
			a.Due = due
			a.TTL--
			transit += uint64(k.Size)
		case h == hopHere && sorted:
			s.sink.put(k, key).Due = due
		case h == hopHere:
			s.deliver(k, due)
		default:
			s.lose(k, due, noHop(h))
		}
	}
	s.transit += transit
}

// noHop is why a packet is lost for which there is nothing to do but that.
func noHop(h int32) Cause {
	if h == hopDead {
		return LostFailed
	}
	return LostNoRoute
}

// choose picks a port of an equal-cost set for a packet.
func (s *Site) choose(k *nodes.Packet, h int32) int32 {
	set := s.sets[h-hopSets]
	return int32(set[spread(k.Way, k.Flow, len(set))])
}

// spread picks one of n equal-cost circuits for a flow: packets of one flow go
// one way.
func spread(way, flow uint16, n int) int {
	x := (uint64(way)<<16 | uint64(flow)) * 0x9e3779b97f4a7c15
	x ^= x >> 29
	x *= 0xbf58476d1ce4e5b9
	return int((x >> 32) * uint64(n) >> 32)
}

// deliverSorted counts what several inputs delivered in this segment. Meters
// look at the packets of a way in order of time.
func (s *Site) deliverSorted() {
	in := &s.sink
	in.close()
	if !s.apart() {
		in.merge()
		for range in.arena {
			k, _ := in.take()
			s.deliver(k, k.Due)
		}
	} else {
		for i := range in.arena {
			s.deliver(&in.arena[i], in.arena[i].Due)
		}
	}
	in.reset()
}

// apart reports whether no way was delivered by two of the sink's runs.
func (s *Site) apart() bool {
	first := s.viaRun + 1
	for _, r := range s.sink.runs {
		s.viaRun++
		for i := r.from; i < r.to; i++ {
			v := &s.via[s.sink.arena[i].Way]
			if *v >= first && *v != s.viaRun {
				return false
			}
			*v = s.viaRun
		}
	}
	return true
}

// deliver counts a packet that leaves the network here.
func (s *Site) deliver(k *nodes.Packet, due des.Time) {
	if k.Bits&nodes.BitCopy != 0 {
		s.surplus(k, due)
		return
	}
	s.delivered++
	m := &s.net.meters[k.Way]
	if k.Born >= s.st.from && due < s.st.to {
		m.add(k, due, s.st.stretch, s.st.fault)
	} else {
		stretch, fault := s.net.history.find(k.Born, due)
		m.add(k, due, stretch, fault)
	}
	if s.hostOf != nil {
		s.hear(k, due)
	}
}

// lose counts a packet lost here at the given instant.
//
//go:noinline
func (s *Site) lose(k *nodes.Packet, at des.Time, cause Cause) {
	if k.Bits&nodes.BitCopy != 0 { // nobody misses it
		s.discard(k.Way)
		return
	}
	s.lost++
	i := s.lossOf[k.Way]
	if i == 0 {
		s.losses = append(s.losses, Loss{Way: k.Way})
		i = int32(len(s.losses))
		s.lossOf[k.Way] = i
	}
	s.traces[s.net.classOf[k.Way]].lose(k.Born)
	v := s.st
	if k.Born < v.from || at >= v.to {
		v.stretch, v.fault = s.net.history.find(k.Born, at)
	}
	s.losses[i-1].add(k, &v, cause)
}

// emit lets sources send what is born before the given instant.
func (s *Site) emit(before des.Time) {
	limit := min(before, s.net.cfg.Length)
	least := des.Never
	for i, t := range s.next {
		if t < limit {
			s.emitOne(i, limit)
			t = s.next[i]
		}
		least = min(least, t)
	}
	if least >= s.net.cfg.Length {
		least = des.Never
	}
	s.srcMin = least
}

func (s *Site) emitOne(i int, limit des.Time) {
	src := &s.sources[i]
	key := sourceKey + int32(i) // after every fibre input
	bytes := uint64(0)
	h := s.hop[src.way]
	if h >= 0 && h < hopSets && src.gate == nil { // straight to the port
		in := &s.ports[h].in
		in.begin(key)
		from := len(in.arena)
		in.arena = src.s.Emit(limit, in.arena)
		sent := in.arena[from:]
		for j := range sent {
			k := &sent[j]
			bytes += uint64(k.Size)
			k.Due += s.access.at(k.Due)
		}
		src.packets += uint64(len(sent))
	} else {
		s.scratch = src.s.Emit(limit, s.scratch[:0])
		for j := range s.scratch {
			k := &s.scratch[j]
			bytes += uint64(k.Size)
			due := k.Due + s.access.at(k.Due)
			if src.gate == nil || s.passGate(src.gate, k, due) {
				s.enter(k, due, h, key)
			}
		}
		src.packets += uint64(len(s.scratch))
	}
	s.next[i] = src.s.Next()
	src.bytes += bytes
}

// enter takes a packet into the network.
func (s *Site) enter(k *nodes.Packet, due des.Time, h, key int32) {
	switch {
	case h >= hopHeld:
		s.keep(k)
	case h >= hopSets:
		s.ports[s.choose(k, h)].in.put(k, key).Due = due
	case h >= 0:
		s.ports[h].in.put(k, key).Due = due
	case h == hopHere:
		s.deliver(k, due)
	default:
		s.lose(k, due, noHop(h))
	}
}

// keep holds a packet at the ingress.
func (s *Site) keep(k *nodes.Packet) {
	for i := range s.held {
		if s.held[i].way == k.Way {
			s.held[i].buf = append(s.held[i].buf, *k)
			return
		}
	}
}

// release sends what was held until now, in order, and ends the hold.
func (s *Site) release(now des.Time) {
	kept := s.held[:0]
	for _, h := range s.held {
		if h.until > now {
			kept = append(kept, h)
			continue
		}
		s.stale = true
		to := s.resolve(h.way)
		key := sourceKey + int32(s.sourceOf(h.way))
		for j := range h.buf {
			k := &h.buf[j]
			s.enter(k, now, to, key)
		}
	}
	s.held = kept
	if s.stale {
		s.rebuild()
	}
}

func (s *Site) sourceOf(way uint16) int {
	return slices.IndexFunc(s.sources, func(x source) bool { return x.way == way })
}
