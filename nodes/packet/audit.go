package packet

import (
	"fmt"

	"ferrule/des"
	"ferrule/des/measure"
	"ferrule/nodes"
)

// Totals are the books of a run: offered + copies = delivered + discarded
// copies + duplicates + lost by cause + inside. Delivered counts the first copy
// of each packet that leaves the network, Duplicates further ones.
type Totals struct {
	Offered   uint64
	Delivered uint64
	Lost      [Causes]uint64
	Inside    uint64

	Copies     uint64 // made by the senders of 1+1 circuits
	Discarded  uint64 // copies, at tails or where a duplicate met its end
	Duplicates uint64
	Hops       uint64 // packets put on a line
	Messages   MessageCount
	Ports      int // ports whose queues were checked against Little's law
}

// Inside calls f for every packet still under way or waiting. Second copies on
// 1+1 circuits, and duplicates, have nodes.BitCopy set.
func (n *Network) Inside(f func(p *nodes.Packet)) {
	for _, s := range n.sites {
		for i := range s.inputs {
			p := s.inputs[i].pipe
			for j := p.head; j != p.tail; j++ {
				k := p.buf[j&uint64(len(p.buf)-1)]
				if p.copies != 0 {
					k.Bits |= nodes.BitCopy
				}
				f(&k)
			}
		}
		for i := range s.ports {
			s.ports[i].disc.Clone().Drain(f)
		}
		for i := range s.sources {
			s.sources[i].gate.each(f)
			s.sources[i].host.each(f)
		}
		for i := range s.held {
			for j := range s.held[i].buf {
				f(&s.held[i].buf[j])
			}
		}
	}
}

// Audit closes the books: every packet of every way is accounted for once, and
// at every queue the area under the number waiting equals the time waited. It
// reports what does not hold, one line each.
func (n *Network) Audit() (t Totals, failures []string) {
	ways := len(n.meters)
	offered, fates := make([]uint64, ways), make([]uint64, ways)
	for _, s := range n.sites {
		for i := range s.sources {
			offered[s.sources[i].way] += s.sources[i].packets
			t.Offered += s.sources[i].packets
		}
		for i := range s.losses {
			l := &s.losses[i]
			for _, k := range l.Count {
				for c, v := range k {
					t.Lost[c] += v
					fates[l.Way] += v
				}
			}
		}
		for i := range s.ports {
			for w, v := range s.ports[i].copied {
				t.Copies += v
				offered[w] += v
			}
		}
		for w, v := range s.discarded {
			t.Discarded += v
			fates[w] += v
		}
		t.Messages.Sent += s.messages.Sent
		t.Messages.Arrived += s.messages.Arrived
		t.Messages.Lost += s.messages.Lost
	}
	for w := range n.meters {
		for _, c := range n.meters[w].Cells {
			if c != nil {
				t.Delivered += c.Exact.N
				t.Duplicates += c.Surplus
				fates[w] += c.Exact.N + c.Surplus
				if c.Exact.N != c.Delay.Count() {
					failures = append(failures, fmt.Sprintf("way %d: %d delays in the histogram of %d packets", w, c.Delay.Count(), c.Exact.N))
				}
			}
		}
	}
	n.Inside(func(p *nodes.Packet) {
		t.Inside++
		fates[p.Way]++
	})
	for w := range offered {
		if offered[w] != fates[w] {
			a, d := nodes.AggOf(uint16(w))
			failures = append(failures, fmt.Sprintf("aggregate %s direction %d: %d packets and copies, accounted for %d", n.plant.Aggregates[a].Name, d, offered[w], fates[w]))
		}
	}
	var seen uint64
	for _, s := range n.sites {
		seen += s.delivered
	}
	if seen != t.Delivered {
		failures = append(failures, fmt.Sprintf("%d packets left the network, %d were metered", seen, t.Delivered))
	}
	failures = append(failures, n.auditQueues(&t)...)
	return t, failures
}

// auditQueues holds every queue to Little's law in integers.
func (n *Network) auditQueues(t *Totals) (failures []string) {
	for _, s := range n.sites {
		for i := range s.ports {
			q := &s.ports[i]
			t.Ports++
			t.Hops += q.count.sent
			now := max(n.now, q.changed)
			c := q.counters(now)
			waited, count := c.waits, 0
			q.disc.Clone().Drain(func(p *nodes.Packet) {
				waited.Add(uint64(now - p.Due))
				count++
			})
			name := n.plant.Circuits[q.circuit].Name + " at " + n.plant.Sites[s.id].Name
			if waited != c.area {
				failures = append(failures, fmt.Sprintf("port %s: area under its queue %.6g ps, time waited in it %.6g ps", name, c.area.Float(), waited.Float()))
			}
			if count != q.waiting || q.disc.Len() != q.waiting {
				failures = append(failures, fmt.Sprintf("port %s: counts %d waiting, holds %d", name, q.waiting, count))
			}
		}
	}
	return failures
}

// PortReport is what a port did from the end of the warm-up until the sources
// ended; MaxBytes is from the start.
type PortReport struct {
	Circuit     nodes.CircuitID
	From        nodes.SiteID
	Rate        nodes.Rate
	Sent, Lost  uint64
	LineBytes   uint64
	IPBytes     uint64
	Delayed     uint64
	Arrived     uint64
	MeanWait    float64 // ps, over packets sent or flushed
	MeanQueue   float64 // packets waiting, time average
	MaxBytes    nodes.Bytes
	Utilisation float64 // share of the time its line was busy
	Service     float64 // ps: mean line time
	ServiceCoV2 float64 // squared coefficient of variation of line times
	Gap         float64 // ps: mean gap between arrivals, of all classes
	GapCoV2     float64 // squared coefficient of variation of gaps
}

// PortReports lists the ports that sent or lost anything, by site and circuit.
func (n *Network) PortReports() []PortReport {
	var out []PortReport
	from := n.cfg.WarmUp
	if !n.mark {
		from = 0
	}
	until := min(n.now, n.cfg.Length)
	for _, s := range n.sites {
		for i := range s.ports {
			q := &s.ports[i]
			c, m := q.counters(max(until, q.changed)), q.mark
			if n.ended {
				c = q.final
			}
			r := PortReport{
				Circuit: q.circuit, From: s.id, Rate: q.line.Rate(), Sent: c.sent - m.sent, Lost: c.lost - m.lost,
				LineBytes: q.lineBytes(c.sent-m.sent, c.ipBytes-m.ipBytes), IPBytes: c.ipBytes - m.ipBytes, Delayed: c.delayed - m.delayed,
				Arrived: c.packetsIn - m.packetsIn, MaxBytes: c.maxBytes,
			}
			if r.Sent == 0 && r.Lost == 0 {
				continue
			}
			c.area.Sub(m.area)
			c.waits.Sub(m.waits)
			span := float64(max(until-from, 1))
			r.MeanQueue = c.area.Float() / span
			if r.Sent > 0 {
				sent := float64(r.Sent)
				r.MeanWait = c.waits.Float() / sent
				r.Service = float64(c.service-m.service) / sent
				if mean2 := float64(r.Service * r.Service); mean2 > 0 {
					r.ServiceCoV2 = max(0, (c.service2-m.service2)/sent/mean2-1)
				}
			}
			if n := float64(r.Arrived); n > 0 {
				r.Gap = float64(c.lastIn-m.lastIn) / n
				if mean2 := float64(r.Gap * r.Gap); mean2 > 0 {
					r.GapCoV2 = max(0, (c.gap2-m.gap2)/n/mean2-1)
				}
			}
			r.Utilisation = float64(c.service-m.service) / span
			out = append(out, r)
		}
	}
	return out
}

// Offered is what a way's source sent.
type Offered struct {
	Packets, Bytes uint64 // since the end of the warm-up
	All            uint64 // packets since the start
}

// Offered reports what each way's source sent; ways without one have zeros.
func (n *Network) Offered() []Offered {
	out := make([]Offered, len(n.meters))
	for _, s := range n.sites {
		for i := range s.sources {
			x := &s.sources[i]
			out[x.way] = Offered{Packets: x.packets - x.markP, Bytes: x.bytes - x.markB, All: x.packets}
		}
	}
	return out
}

// Meters gives read access to the meters by way.
func (n *Network) Meters() []Meter { return n.meters }

// Losses calls f for every site's count of every way it lost packets of, by
// site and way.
func (n *Network) Losses(f func(site nodes.SiteID, l *Loss)) {
	for _, s := range n.sites {
		for _, i := range s.lossOf {
			if i > 0 {
				f(s.id, &s.losses[i-1])
			}
		}
	}
}

// Stretches lists the stretches begun so far; the last ends at Now.
func (n *Network) Stretches() []Stretch { return n.history.s }

// StretchOf reports the stretch to which a packet counts that was sent at born
// and met its fate at fate.
func (n *Network) StretchOf(born, fate des.Time) int {
	stretch, _ := n.history.find(born, fate)
	return int(stretch)
}

// Now is the instant up to which everything has been done.
func (n *Network) Now() des.Time { return n.now }

// Events merges the event logs of the sites and of the acts, by time, then
// acts first, then by site.
func (n *Network) Events() []nodes.Event {
	all := append([]nodes.Event(nil), n.log...)
	for _, s := range n.sites {
		all = append(all, s.events...)
	}
	sortEvents(all)
	return all
}

// Transit reports the IP bytes that each router received from a fibre and sent
// on, since the end of the warm-up.
func (n *Network) Transit() []uint64 {
	out := make([]uint64, len(n.sites))
	for i, s := range n.sites {
		out[i] = s.transit - s.markT
	}
	return out
}

// Latencies returns the forwarding latencies sampled at a site, in ns: one in
// 64 of the packets that came through an input whose latency varies.
func (n *Network) Latencies(s nodes.SiteID) *measure.Hist { return &n.sites[s].latencies }

// Config is what the network was made from, defaults filled in.
func (n *Network) Config() Config { return n.cfg }
