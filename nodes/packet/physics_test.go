package packet_test

import (
	"fmt"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/packet"
)

// beat sends packets of one size at equal gaps, count of them.
type beat struct {
	way   uint16
	at    des.Time
	gap   des.Time
	size  uint16
	count uint32
	seq   uint32
}

func (s *beat) Next() des.Time {
	if s.seq == s.count {
		return des.Never
	}
	return s.at
}

func (s *beat) Emit(end des.Time, buf []nodes.Packet) []nodes.Packet {
	for s.Next() < end {
		buf = append(buf, nodes.Packet{Born: s.at, Due: s.at, Seq: s.seq, Way: s.way, Size: s.size, TTL: nodes.InitialTTL})
		s.seq++
		s.at += s.gap
	}
	return buf
}

func (s *beat) Scale(at des.Time, factor float64) { s.gap = des.Time(float64(s.gap) / factor) }
func (s *beat) Clone() nodes.Source               { c := *s; return &c }

// plantOf joins sites by fibres, given as ends and delay, with a circuit over
// each at 1 Gb/s and 26 bytes of overhead, for one class.
func plantOf(sites int, fibres ...[3]des.Time) *nodes.Plant {
	p := &nodes.Plant{Classes: []nodes.Class{{Name: "only"}}}
	for i := range sites {
		p.Sites = append(p.Sites, nodes.Site{Name: fmt.Sprint("s", i)})
	}
	for i, f := range fibres {
		ends := [2]nodes.SiteID{nodes.SiteID(f[0]), nodes.SiteID(f[1])}
		p.Fibres = append(p.Fibres, nodes.Fibre{Name: fmt.Sprint("f", i), Ends: ends, Delay: f[2]})
		p.Circuits = append(p.Circuits, nodes.Circuit{Name: fmt.Sprint("c", i), Ends: ends, Rate: nodes.Gbps, Overhead: 26, Along: []nodes.FibreID{nodes.FibreID(i)}})
	}
	return p
}

func between(p *nodes.Plant, class int, from, to nodes.SiteID) uint16 {
	p.Aggregates = append(p.Aggregates, nodes.Aggregate{Name: fmt.Sprint("a", len(p.Aggregates)), Class: nodes.ClassID(class), Ends: [2]nodes.SiteID{from, to}})
	return nodes.WayOf(nodes.AggID(len(p.Aggregates)-1), nodes.Out)
}

// net builds a network of wardens that react after the given time.
func net(cfg packet.Config, react des.Time) *packet.Network {
	return built(cfg, func(nodes.SiteID) *warden {
		return &warden{plant: cfg.Plant, react: react, express: nodes.None}
	})
}

// finish runs n to its end and reports its books, which must balance.
func finish(t *testing.T, n *packet.Network) packet.Totals {
	t.Helper()
	n.Run(des.NewKernel(n, nil), nil)
	totals, bad := n.Audit()
	if len(bad) > 0 {
		t.Errorf("audit: %q", bad)
	}
	return totals
}

// exact sums up all that was delivered of a way.
func exact(n *packet.Network, way uint16) (count uint64, least, most des.Time) {
	least = des.Never
	for _, c := range n.Meters()[way].Cells {
		if c != nil {
			count += c.Exact.N
			least, most = min(least, des.Time(c.Exact.Min)), max(most, des.Time(c.Exact.Max))
		}
	}
	return count, least, most
}

// An empty path takes the forwarding of every router on it, the serialisation
// of every hop and the light, to the picosecond.
func TestEmptyPathDelay(t *testing.T) {
	p := plantOf(4, [3]des.Time{0, 1, 1_234_567_891}, [3]des.Time{2, 1, 300_000_007}, [3]des.Time{2, 3, 77_777_777_777})
	p.Circuits[1].Rate = 2_487_900_000
	p.Circuits[2].Rate, p.Circuits[2].Overhead = 10*nodes.Mbps+7, 0
	way := between(p, 0, 0, 3)
	cfg := packet.Config{Plant: p, Length: des.Second}
	want := 1_234_567_891 + 300_000_007 + 77_777_777_777*des.Picosecond
	for i := range p.Sites {
		c := des.Time(15_000_001 + 1000*i)
		cfg.Forwarding = append(cfg.Forwarding, packet.Forwarding{Constant: c})
		want += c
	}
	for _, c := range p.Circuits {
		want += c.Rate.TxTime(777 + c.Overhead)
	}
	cfg.Sources = []packet.Source{{Way: way, Source: &beat{way: way, at: 5, gap: 50 * des.Millisecond, size: 777, count: 3}}}
	n := net(cfg, 0)
	if totals := finish(t, n); totals.Hops != 9 {
		t.Errorf("%d hops for 3 packets over 3 circuits", totals.Hops)
	}
	if count, least, most := exact(n, way); count != 3 || least != want || most != want {
		t.Errorf("%d packets in %d to %d ps, want 3 in %d ps", count, least, most, want)
	}
}

// triangle is a fibre from site 0 to site 1 and a detour over site 2 of six
// times the light, with a constant stream each way.
func triangle(detect des.Time) (packet.Config, [2]uint16, *nodes.Plant) {
	p := plantOf(3, [3]des.Time{0, 1, 2_000_000_003}, [3]des.Time{0, 2, 6 * des.Millisecond}, [3]des.Time{2, 1, 6 * des.Millisecond})
	out := between(p, 0, 0, 1)
	ways := [2]uint16{out, out + 1}
	cfg := packet.Config{Plant: p, WarmUp: 10 * des.Millisecond, Length: 200 * des.Millisecond, Detect: detect, Converge: 20 * des.Millisecond}
	for _, w := range ways {
		cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: &beat{way: w, at: 3_333_333, gap: 10_000_019, size: 500, count: 1 << 30}})
	}
	return cfg, ways, p
}

// A constant stream loses rate x (2 d1 + detection + reaction) of its packets
// to a cut d1 of light away, within one by phase: what is past the break goes
// on, and the sender learns of it by the darkness of its own receive side.
func TestCutLosesTwiceTheWay(t *testing.T) {
	const cut, detect, react = 50 * des.Millisecond, 3 * des.Millisecond, 1700 * des.Microsecond
	for _, tenth := range []des.Time{1, 5, 9} {
		cfg, ways, p := triangle(detect)
		n := net(cfg, react)
		place := p.Fibres[0].Delay * tenth / 10
		n.Schedule(packet.Act{At: cut, Kind: packet.ActCut, Name: "cut", Fibre: 0, Where: place})
		totals := finish(t, n)
		for c, lost := range totals.Lost {
			if lost > 0 && packet.Cause(c) != packet.LostCut {
				t.Errorf("cut at %d/10: %d packets lost as %v", tenth, lost, packet.Cause(c))
			}
		}
		for d, w := range ways {
			d1 := place
			if d == 1 {
				d1 = p.Fibres[0].Delay - place
			}
			var lost uint64
			n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
				if l.Way == w {
					for _, c := range l.Count {
						lost += c[packet.LostCut]
					}
				}
			})
			gap, tx := des.Time(10_000_019), nodes.Gbps.TxTime(526)
			formula := float64(2*d1+detect+react) / float64(gap)
			if f := float64(lost); f < formula-1 || f > formula+1 {
				t.Errorf("cut at %d/10, direction %d: %d packets lost, want %.2f within one", tenth, d, lost, formula)
			}
			// To the packet: its last bit reaches the place after the cut, its
			// first leaves before the port goes down.
			want := uint64(0)
			for s := des.Time(3_333_333); s < cut+d1+detect+react; s += gap {
				if s+tx+d1 > cut {
					want++
				}
			}
			if lost != want {
				t.Errorf("cut at %d/10, direction %d: %d packets lost, by their instants %d", tenth, d, lost, want)
			}
			if o := n.Meters()[w].Outages; len(o) != 1 || o[0].Fault != 0 || o[0].To-o[0].From != des.Time(lost+1)*gap {
				t.Errorf("cut at %d/10, direction %d: outage %+v, want one of %d packets' gaps", tenth, d, o, lost+1)
			}
		}
	}
}

// single sends one packet over one fibre with the given acts and reports
// whether it was lost. Its bits pass 0.4 ms from site 0 from first to last.
func single(t *testing.T, acts func(first, last des.Time) []packet.Act) (lost bool) {
	t.Helper()
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	way := between(p, 0, 0, 1)
	const born, place = 20 * des.Millisecond, 400 * des.Microsecond
	n := net(packet.Config{Plant: p, Length: des.Second, Detect: 3 * des.Millisecond, Sources: []packet.Source{
		{Way: way, Source: &beat{way: way, at: born, gap: des.Second, size: 1000, count: 1}},
	}}, des.Millisecond)
	tx := nodes.Gbps.TxTime(1026)
	for _, a := range acts(born+place, born+place+tx) {
		a.Where = place
		n.Schedule(a)
	}
	totals := finish(t, n)
	if totals.Lost[packet.LostCut]+totals.Delivered != 1 {
		t.Errorf("one packet: %+v", totals)
	}
	return totals.Lost[packet.LostCut] == 1
}

func TestCutToThePicosecond(t *testing.T) {
	cut := func(at des.Time) packet.Act { return packet.Act{At: at, Kind: packet.ActCut} }
	mend := func(at des.Time) packet.Act { return packet.Act{At: at, Kind: packet.ActRepair} }
	for _, c := range []struct {
		name string
		acts func(first, last des.Time) []packet.Act
		lost bool
	}{
		{"no cut", func(_, _ des.Time) []packet.Act { return nil }, false},
		{"cut as the last bit is past", func(_, l des.Time) []packet.Act { return []packet.Act{cut(l)} }, false},
		{"cut a picosecond before that", func(_, l des.Time) []packet.Act { return []packet.Act{cut(l - 1)} }, true},
		{"cut between its bits", func(f, l des.Time) []packet.Act { return []packet.Act{cut((f + l) / 2)} }, true},
		{"a flicker between its bits", func(f, l des.Time) []packet.Act { return []packet.Act{cut((f + l) / 2), mend((f+l)/2 + 1)} }, true},
		{"lit again as its first bit comes", func(f, _ des.Time) []packet.Act { return []packet.Act{cut(f - des.Millisecond), mend(f)} }, false},
		{"lit again a picosecond later", func(f, _ des.Time) []packet.Act { return []packet.Act{cut(f - des.Millisecond), mend(f + 1)} }, true},
	} {
		if lost := single(t, c.acts); lost != c.lost {
			t.Errorf("%s: lost %v, want %v", c.name, lost, c.lost)
		}
	}
}

// whats counts the events of each kind.
func whats(n *packet.Network) map[string]int {
	m := map[string]int{}
	for _, e := range n.Events() {
		m[e.What+" "+e.Subject+" "+e.Detail]++
	}
	return m
}

// A cut shorter than detection takes raises no alarm and loses just what was
// sent into it; one a picosecond longer raises each alarm once, and light back
// is told once.
func TestShortCutRaisesNoAlarm(t *testing.T) {
	const detect = 3 * des.Millisecond
	for _, c := range []struct {
		length des.Time
		alarms int
	}{{detect, 0}, {detect + 1, 1}, {40 * des.Millisecond, 1}} {
		cfg, _, _ := triangle(detect)
		n := net(cfg, 500*des.Microsecond)
		n.Schedule(packet.Act{At: 50 * des.Millisecond, Kind: packet.ActCut, Where: des.Millisecond})
		n.Schedule(packet.Act{At: 50*des.Millisecond + c.length, Kind: packet.ActRepair})
		finish(t, n)
		got := whats(n)
		for _, alarm := range []string{"light c0 0 on 1", "light c0 1 on 1", "fibre f0 0", "fibre f0 1"} {
			if want := 2 * c.alarms; got[alarm] != want { // one at each end
				t.Errorf("dark for %v: %q told %d times, want %d", c.length, alarm, got[alarm], want)
			}
		}
	}
}

// A fibre dark at two places is lit for a receiver when the light from the
// farther one comes; light back is told once, and not before.
func TestLightBackFromTheFarthestPlace(t *testing.T) {
	const detect, mend = 100 * des.Microsecond, 80 * des.Millisecond
	for _, near := range []bool{false, true} {
		cfg, _, p := triangle(detect)
		n := net(cfg, 0)
		places := [2]des.Time{200 * des.Microsecond, 1900 * des.Microsecond}
		if near {
			places[0], places[1] = places[1], places[0]
		}
		n.Schedule(packet.Act{At: 50 * des.Millisecond, Kind: packet.ActCut, Where: places[0]})
		n.Schedule(packet.Act{At: 51 * des.Millisecond, Kind: packet.ActCut, Where: places[1]})
		n.Schedule(packet.Act{At: mend, Kind: packet.ActRepair})
		finish(t, n)
		told := 0
		for _, e := range n.Events() {
			if e.What != "light" || e.Detail != "1 on 1" {
				continue
			}
			told++
			want := mend + 1900*des.Microsecond + detect // site 0 receives from the end of the fibre
			if e.Site == 1 {
				want = mend + p.Fibres[0].Delay - 200*des.Microsecond + detect
			}
			if e.At != want {
				t.Errorf("site %d told of light at %d ps, want %d ps", e.Site, e.At, want)
			}
		}
		if told != 2 {
			t.Errorf("light back told %d times, want once at each end", told)
		}
	}
}

// With one direction dark the other goes on, and only the receiver sees it.
func TestOneWayCut(t *testing.T) {
	for d := range nodes.Direction(2) {
		cfg, ways, _ := triangle(3 * des.Millisecond)
		n := built(cfg, func(nodes.SiteID) *warden { return &warden{plant: cfg.Plant, react: des.Second, express: nodes.None} })
		n.Schedule(packet.Act{At: 50 * des.Millisecond, Kind: packet.ActCut, Where: des.Millisecond, OneWay: true, Dir: d})
		n.Schedule(packet.Act{At: 70 * des.Millisecond, Kind: packet.ActRepair})
		finish(t, n)
		lost := [2]uint64{}
		n.Losses(func(_ nodes.SiteID, l *packet.Loss) {
			for _, c := range l.Count {
				lost[l.Way-ways[0]] += c[packet.LostCut]
			}
		})
		const want = 20e9 / 10_000_019 // 20 ms of it
		if l := float64(lost[d]); l < want-1 || l > want+1 || lost[d.Reverse()] != 0 {
			t.Errorf("direction %d dark for 20 ms: lost %v, want %.1f of it and none of the other", d, lost, want)
		}
		for _, e := range n.Events() {
			if e.What == "light" && e.Site != nodes.SiteID(d.Reverse()) {
				t.Errorf("direction %d dark: site %d was told", d, e.Site)
			}
		}
		if got := whats(n); got["light c0 0 on 1"] != 1 || got["light c0 1 on 1"] != 1 {
			t.Errorf("direction %d dark: events %v, want light lost and back once", d, got)
		}
	}
}

// A way that only goes out has books for that direction alone.
func TestOneWayBooks(t *testing.T) {
	p := plantOf(2, [3]des.Time{0, 1, des.Millisecond})
	way := between(p, 0, 0, 1)
	p.Aggregates[0].OneWay = true
	n := net(packet.Config{Plant: p, Length: des.Second, WarmUp: 500 * des.Millisecond, Sources: []packet.Source{
		{Way: way, Source: &beat{way: way, at: 1, gap: des.Millisecond, size: 100, count: 1 << 30}},
	}}, 0)
	totals := finish(t, n)
	if totals.Offered != 1000 || totals.Delivered != 1000 || totals.Inside != 0 {
		t.Errorf("books %+v, want 1000 offered and delivered", totals)
	}
	o := n.Offered()
	if want := (packet.Offered{Packets: 500, Bytes: 50_000, All: 1000}); o[way] != want || o[way+1] != (packet.Offered{}) {
		t.Errorf("offered %+v, want %+v and nothing back", o, want)
	}
	if n.Meters()[way+1].Cells != nil {
		t.Error("something was delivered of the way back")
	}
	if r := n.PortReports(); len(r) != 1 || r[0].Sent != 500 || r[0].IPBytes != 50_000 || r[0].LineBytes != 63_000 || r[0].MeanWait != 0 {
		t.Errorf("port reports %+v, want one port that sent 500 packets, 50000 IP bytes, 63000 on the line", r)
	} else if want := 500 * nodes.Gbps.TxTime(126).Seconds() / 0.5; r[0].Utilisation < want*0.999999 || r[0].Utilisation > want*1.000001 {
		t.Errorf("utilisation %v, want %v", r[0].Utilisation, want)
	}
}

// Behind the first queue of a row of equal lines packets of one size never
// wait: they leave it no closer than their serialisation.
func TestTandemOfEqualPacketsWaitsOnce(t *testing.T) {
	p := plantOf(5, [3]des.Time{0, 1, 300_000_007}, [3]des.Time{1, 2, 100_000_003}, [3]des.Time{2, 3, 1_000_003}, [3]des.Time{3, 4, 500_000_009})
	var cfg packet.Config
	for i := range 20 {
		w := between(p, 0, 0, 4)
		cfg.Sources = append(cfg.Sources, packet.Source{Way: w, Source: &beat{way: w, at: des.Time(i) * 777_777, gap: 130_000_000 + des.Time(i)*1_000_003, size: 800, count: 1 << 30}})
	}
	cfg.Plant, cfg.Length, cfg.WarmUp = p, des.Second, 100*des.Millisecond
	n := net(cfg, 0)
	finish(t, n)
	r := n.PortReports()
	if len(r) != 4 || r[0].Delayed < 10_000 {
		t.Fatalf("%d ports, %d packets waited at the first; want 4 and 10000 or more", len(r), r[0].Delayed)
	}
	for _, x := range r[1:] {
		if x.Delayed != 0 || x.MeanWait != 0 || x.MaxBytes != 0 {
			t.Errorf("at site %d %d packets waited, %v ps in the mean, up to %d bytes", x.From, x.Delayed, x.MeanWait, x.MaxBytes)
		}
	}
}

// A packet that two routers send to each other crosses 64 lines and is lost.
func TestLoopEndsByTTL(t *testing.T) {
	p := plantOf(3, [3]des.Time{0, 1, 20 * des.Microsecond}, [3]des.Time{1, 2, des.Millisecond})
	way := between(p, 0, 0, 2)
	n := net(packet.Config{Plant: p, Length: des.Second, Sources: []packet.Source{
		{Way: way, Source: &beat{way: way, at: 1, gap: 10 * des.Millisecond, size: 100, count: 7}},
	}}, 0)
	to := func(c nodes.CircuitID) *nodes.Table {
		return &nodes.Table{Version: 9, Next: [][]nodes.CircuitID{{c}, {c}, {c}}}
	}
	n.Local(0).Install(to(0))
	n.Local(1).Install(to(0))
	n.Begin()
	if totals := finish(t, n); totals.Lost[packet.LostTTL] != 7 || totals.Hops != 7*nodes.InitialTTL {
		t.Errorf("%d lost as ttl after %d hops; want 7 after %d", totals.Lost[packet.LostTTL], totals.Hops, 7*nodes.InitialTTL)
	}
}

// courier sends a message from site 0 to site 1 at given instants.
type courier struct{ at []des.Time }

func (c *courier) Clone() nodes.ControlAgent { return &courier{c.at} }

func (c *courier) Handle(x nodes.Local, now des.Time, m nodes.Message) {
	switch m.Op {
	case opPoll:
		x.Send(1, nodes.Message{Op: opTell})
	case opTell:
		x.Note("arrived", fmt.Sprint(int64(m.Sent)), fmt.Sprint(int64(now)))
	}
}

// A message is lost when its way is dark as it passes; new ways are in force
// once they have converged, and after the repair the old ones again.
func TestMessagesTakeTheWaysInForce(t *testing.T) {
	const ms = des.Millisecond
	p := plantOf(3, [3]des.Time{0, 1, 2 * ms}, [3]des.Time{0, 2, 6 * ms}, [3]des.Time{2, 1, 7 * ms})
	cfg := packet.Config{Plant: p, Length: 400 * ms, Detect: 3 * ms, Converge: 20 * ms}
	const cut, mend, place = 100 * ms, 200 * ms, ms / 2
	want := map[des.Time]des.Time{ // sent -> delay; 0: lost
		50 * ms:              2 * ms,
		cut - place - 1:      2 * ms, // just past
		cut - place:          0,
		cut + 19*ms:          0, // by the old way
		cut + 20*ms - 1:      0,
		cut + 20*ms:          13 * ms,
		mend - place:         13 * ms,
		mend + 20*ms - 1:     13 * ms,
		mend + 20*ms:         2 * ms,
		mend + 20*ms + place: 2 * ms,
	}
	n, err := packet.New(cfg)
	if err != nil {
		t.Fatal(err)
	}
	n.SetAgents([]nodes.ControlAgent{&courier{}, &courier{}, &courier{}})
	for at := range want {
		n.Local(0).Later(nodes.Message{At: at, Op: opPoll})
	}
	n.Begin()
	n.Schedule(packet.Act{At: cut, Kind: packet.ActCut, Fibre: 0, Where: place})
	n.Schedule(packet.Act{At: mend, Kind: packet.ActRepair, Fibre: 0})
	totals := finish(t, n)
	arrived := whats(n)
	lost := uint64(0)
	for sent, delay := range want {
		key := fmt.Sprintf("arrived %d %d", int64(sent), int64(sent+delay))
		if delay == 0 {
			lost++
			for k := range arrived {
				if strings.HasPrefix(k, fmt.Sprintf("arrived %d ", int64(sent))) {
					t.Errorf("sent at %v into the dark: %s", sent, k)
				}
			}
		} else if arrived[key] != 1 {
			t.Errorf("sent at %v: no arrival after %v in %v", sent, delay, arrived)
		}
	}
	if m := totals.Messages; m.Sent != uint64(len(want)) || m.Lost != lost || m.Arrived != m.Sent-lost {
		t.Errorf("messages %+v, want %d sent and %d lost", m, len(want), lost)
	}
}

// Of what comes to an idle line at one instant the highest class goes first,
// and within a class what comes over a fibre before what a source sends: all
// arrivals of an instant come before the decision.
func TestArrivalsOfOneInstant(t *testing.T) {
	p := plantOf(3, [3]des.Time{0, 1, des.Millisecond}, [3]des.Time{1, 2, des.Millisecond})
	p.Classes = []nodes.Class{{Name: "high"}, {Name: "low"}}
	p.Circuits[0].Overhead, p.Circuits[1].Overhead = 0, 0
	const at = 20 * des.Millisecond
	tx := nodes.Gbps.TxTime(1000)
	low, local, over, high := between(p, 1, 1, 2), between(p, 0, 1, 2), between(p, 1, 0, 2), between(p, 0, 1, 2)
	cfg := packet.Config{Plant: p, Length: des.Second}
	for _, s := range []struct {
		way uint16
		at  des.Time
	}{{low, at}, {local, at}, {over, at - des.Millisecond - tx}, {high, at}} {
		cfg.Sources = append(cfg.Sources, packet.Source{Way: s.way, Source: &beat{way: s.way, at: s.at, gap: 1, size: 1000, count: 1}})
	}
	n := net(cfg, 0)
	finish(t, n)
	light := des.Millisecond + tx
	for _, c := range []struct {
		name string
		way  uint16
		want des.Time
	}{{"first source", local, light}, {"second source", high, light + tx}, {"low class over the fibre", over, 2*light + 2*tx}, {"low class", low, light + 3*tx}} {
		if _, least, _ := exact(n, c.way); least != c.want {
			t.Errorf("%s: %d ps, want %d ps", c.name, least, c.want)
		}
	}
}
