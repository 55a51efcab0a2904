package replay

import (
	"bytes"
	"encoding/binary"
	"errors"
	"fmt"
	"io"
	"math/rand/v2"
	"runtime"
	"slices"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
)

// rows is a table of n packets of two classes, 100 us apart and some at once.
func rows(n int) []byte {
	var b bytes.Buffer
	b.WriteString("# made for a test\r\ntime, bytes, class, flow\r\n")
	for i := range n {
		fmt.Fprintf(&b, "%d.%06d, %d, %s, %d\n", 1000+i/10000, i%10000/2*200, 40+i%1400, []string{"gold", "rest"}[i%3&1], i%5)
	}
	return b.Bytes()
}

// flowRows is a table of n flows that overlap.
func flowRows(n int) []byte {
	var b bytes.Buffer
	b.WriteString("start,end,bytes,packets,from,to,dscp\n")
	for i := range n {
		start := (i * 7) % n
		fmt.Fprintf(&b, "%d.5,%d.75,%d,%d,192.0.2.1,198.51.100.%d,%d\n", start, start+i%9, (i%20+1)*777+i, i%20+1, i%200, 46*(i%2))
	}
	return b.Bytes()
}

// kinds are traces of every format, some of them not held in memory.
func kinds(t testing.TB) map[string]*Trace {
	t.Helper()
	two := Spec{Name: "file", Classes: []string{"gold", "rest"}, Rules: []Rule{
		{DSCP: 46, Class: 0}, {DSCP: 1, Class: 1, Ways: BackOnly}, {DSCP: nodes.None, Class: 1},
	}}
	mixed := frames(3000)
	for i := 0; i+3 < len(mixed); i += 7 {
		mixed[i], mixed[i+3] = mixed[i+3], mixed[i]
	}
	out := map[string]*Trace{}
	for name, b := range map[string][]byte{
		"pcap": write(t, frames(3000), PCAP, true, 96), "blocks": write(t, mixed, PCAPNG, true, 1500),
		"table": rows(5000), "flows": flowRows(400),
	} {
		out[name] = open(t, b, two)
		far := *out[name]
		far.file, far.held = bytes.NewReader(b), nil
		out[name+" through a window"] = &far
	}
	return out
}

// Whatever way time is divided, and whatever is cloned on the way, the packets
// are the same, in order, from start to stop; Next says when the next one comes.
func TestDivision(t *testing.T) {
	scalings := []change{{des.Second / 2, 1.3}, {des.Second, 0}, {1500 * des.Millisecond, 0.4}, {1500 * des.Millisecond, 1}, {2 * des.Second, 2}}
	for name, tr := range kinds(t) {
		for _, c := range []Config{
			{Class: 1}, {Class: 1, Loop: true, Start: des.Second / 4, Stop: 3 * des.Second},
			{Class: 0, Loop: true, Speed: 1.7}, {Class: 1, Dir: nodes.Back, Loop: true, Speed: 5, Stop: 3 * des.Second},
		} {
			c.Trace, c.Way = tr, 6
			if tr.Format() == Flows {
				c.Speed = 150
			}
			for _, changes := range [][]change{nil, scalings, {{0, 1.5}}} {
				checkDivision(t, fmt.Sprintf("%s %+v %v", name, c.Class, changes), c, changes)
			}
		}
	}
}

func checkDivision(t *testing.T, name string, c Config, changes []change) {
	t.Helper()
	end := 3 * des.Second
	s := source(t, c)
	var want []nodes.Packet
	for _, x := range changes {
		want = s.Emit(x.at, want)
		s.Scale(x.at, x.factor)
	}
	want = s.Emit(end, want)
	if len(want) < 30 || s.Err() != nil {
		t.Fatalf("%s: %d packets, %v", name, len(want), s.Err())
	}
	last := c.Start
	for i, p := range want {
		like := nodes.Packet{Due: p.Born, Born: p.Born, Seq: uint32(i), Flow: p.Flow, Way: 6, Size: p.Size, TTL: nodes.InitialTTL}
		if p != like || p.Born < last || c.Stop > 0 && p.Born >= c.Stop || p.Size == 0 {
			t.Fatalf("%s: packet %d is %+v after %v", name, i, p, last)
		}
		last = p.Born
	}
	r := rand.New(rand.NewPCG(1, 2))
	for range 3 {
		if got := cutUp(t, name, source(t, c), end, changes, r); !slices.Equal(got, want) {
			t.Fatalf("%s: %d packets in pieces, %d in one call, or others", name, len(got), len(want))
		}
	}
}

// cutUp drives s to end in pieces.
func cutUp(t *testing.T, name string, s nodes.Source, end des.Time, changes []change, r *rand.Rand) (out []nodes.Packet) {
	t.Helper()
	for at := des.Time(0); at < end; {
		to := min(end, at+1+des.Time(r.Int64N(int64(end/40))))
		for len(changes) > 0 && changes[0].at <= to {
			to = min(to, changes[0].at)
			if to < changes[0].at || to > at {
				break
			}
			s.Scale(changes[0].at, changes[0].factor)
			changes = changes[1:]
		}
		next := s.Next()
		if r.IntN(3) == 0 {
			c := s.Clone()
			s.Emit(min(end, to+des.Second/20), nil) // the old one goes astray
			s = c
		}
		before := len(out)
		out = s.Emit(to, out)
		if born := len(out) > before; born != (next < to) || born && out[before].Born != next {
			t.Fatalf("%s: Next said %v, packets up to %v: %d", name, next, to, len(out)-before)
		}
		at = to
	}
	return out
}

// What is sent in whole periods is what is in the file, at every speed, and the
// rate is what MeanRate says.
func TestLoops(t *testing.T) {
	for name, tr := range kinds(t) {
		for c := range nodes.ClassID(2) {
			s := source(t, Config{Trace: tr, Class: c, Loop: true, Speed: 4})
			period := tr.Period() / 4
			ps := s.Emit(3*period+period/1000, nil)
			want := tr.Share(c, nodes.Out)
			var got Share
			for _, p := range ps {
				if p.Born < 3*period-10 {
					got.Packets++
					got.Bytes += int64(p.Size)
				}
			}
			if got != (Share{3 * want.Packets, 3 * want.Bytes}) {
				t.Errorf("%s: %v in three periods, want three times %v", name, got, want)
			}
			rate := float64(got.Bytes) * 8 / (3 * period).Seconds()
			if r := rate / s.MeanRate(); r < 1-1e-6 || r > 1+1e-6 {
				t.Errorf("%s: %v bit/s sent, %v said", name, rate, s.MeanRate())
			}
		}
	}
}

// A flow of 10 B in 4 packets from 2 s to 5 s sends 2, 3, 2 and 3 B a second
// apart; another begins and ends with the second of them. By hand.
func TestFlowsByHand(t *testing.T) {
	tr := open(t, []byte("start,end,bytes,packets,from,to,dscp\n3,3,90,2,::1,::2,0\n2,5,10,4,192.0.2.1,192.0.2.2,0\n"), Spec{})
	var got []string
	for _, p := range source(t, Config{Trace: tr}).Emit(des.Hour, nil) {
		got = append(got, fmt.Sprint(p.Born, " ", p.Size, " ", p.Flow))
	}
	want := "0ps 2 1,1s 3 1,1s 45 0,1s 45 0,2s 2 1,3s 3 1"
	if s := strings.Join(got, ","); s != want {
		t.Errorf("%s, want %s", s, want)
	}
}

// Each fault of a table is one line that says where it is.
func TestFaultsOfTables(t *testing.T) {
	const ph, fh = "time,bytes,class\n", "start,end,bytes,packets,from,to,dscp\n"
	long := strings.Repeat("1", 5000)
	for _, x := range []struct{ text, want string }{
		{"time,size\n", "file:1:1: the first row is \"time,size\"; begin with the row time,bytes,class,flow"},
		{ph, "file: the file holds no packets"},
		{ph + "1,2\n", "file:2:1: the row has 2 fields; write time,bytes,class"},
		{ph + "1,40,any\n-2,40,any\n", `file:3:1: time: "-2" is not a time; write seconds, such as 0.000125, to the picosecond at most`},
		{ph + "1.0000000000001,40,any\n", `file:2:1: time: "1.0000000000001" is not a time`},
		{ph + "1, 0,any\n", `file:2:4: bytes: "0" is not the size of a packet`},
		{ph + "1,65536,any\n", `file:2:3: bytes: "65536" is not the size of a packet`},
		{ph + "1,40,gold\n", `file:2:6: class: "gold" is not a class; write the name of a class of the scenario`},
		{ph + "1,40,any\n4000000,40,any\n", "file:3:1: time: is more than 31 days from another packet"},
		{ph + long, "file:2:1: the line is longer than 4094 bytes"},
		{fh + "2,1,40,1,::1,::2,0\n", `file:2:3: end: "1" is before the start; write a later one`},
		{fh + "0,3000000,40,1,::1,::2,0\n", `file:2:3: end: "3000000" is too long after the start`},
		{fh + "0,1,40,0,::1,::2,0\n", `file:2:8: packets: "0" is not a number of packets`},
		{fh + "1,1.000001,1000000,2001,::1,::2,0\n", `file:2:20: packets: "2001" packets are too many for that time; write up to 1000, and one more a nanosecond`},
		{fh + "0,1,40,50,::1,::2,0\n", `file:2:5: bytes: "40" bytes do not make that many packets`},
		{fh + "0,1,40,1,::g,::2,0\n", `file:2:10: from: "::g" is not an address`},
		{fh + "0,1,40,1,::1,x,0\n", `file:2:14: to: "x" is not an address`},
		{fh + "0,1,40,1,::1,::2,64\n", `file:2:18: dscp: "64" is not a code point; write 0 to 63`},
	} {
		_, err := Open(strings.NewReader(x.text), int64(len(x.text)), Spec{Name: "file", Classes: []string{"any"}, Rules: []Rule{{DSCP: nodes.None}}})
		if err == nil || !strings.HasPrefix(err.Error(), x.want) {
			t.Errorf("%v\nwant %s", err, x.want)
		}
	}
}

// faulty is a file that changes or cannot be read after a while.
type faulty struct {
	b    []byte
	left int
	err  error
}

func (f *faulty) ReadAt(p []byte, off int64) (int, error) {
	if f.left--; f.left < 0 {
		return 0, f.err
	}
	return bytes.NewReader(f.b).ReadAt(p, off)
}

// A file that is cut off, overwritten or gone while it is sent ends the source
// with an error.
func TestChangedFile(t *testing.T) {
	b := write(t, frames(5000), PCAP, true, 200)
	for _, x := range []struct {
		file *faulty
		want string
	}{
		{&faulty{b: b, left: 2, err: io.EOF}, "file: the file was changed while it was in use"},
		{&faulty{b: b, left: 2, err: errors.New("no disk")}, "file: packet "},
		{&faulty{b: append(bytes.Clone(b[:len(b)-300]), b[24:324]...), left: 99}, "file: "},
	} {
		tr := open(t, b, Spec{})
		tr.held, tr.file = nil, x.file
		s := source(t, Config{Trace: tr, Loop: true})
		s.Emit(des.Hour, nil)
		if s.Err() == nil || s.Next() != des.Never || !strings.HasPrefix(s.Err().Error(), "file: ") {
			t.Errorf("%v, want %s", s.Err(), x.want)
		}
	}
}

// A packet costs no memory, through a window onto a file too.
func TestEmitAllocatesNothing(t *testing.T) {
	for name, tr := range kinds(t) {
		s := source(t, Config{Trace: tr, Class: 1, Loop: true, Speed: 10})
		buf := s.Emit(tr.Period(), make([]nodes.Packet, 0, 100_000))
		end, sent := tr.Period(), 0
		n := testing.AllocsPerRun(20, func() {
			end += tr.Period() / 10
			buf = s.Emit(end, buf[:0])
			sent += len(buf)
		})
		if n != 0 || sent < 1000 {
			t.Errorf("%s: %v allocations in a call of Emit, %d packets in all", name, n, sent)
		}
	}
}

// endless is a file of one head and one record over and over, each a
// microsecond after the last: as large as it is said to be, and nowhere.
type endless struct{ head, record []byte }

func (e endless) ReadAt(p []byte, off int64) (n int, err error) {
	var room [2048]byte
	one := room[:copy(room[:], e.record)]
	for n < len(p) {
		at := off + int64(n) - int64(len(e.head))
		if at < 0 {
			n += copy(p[n:], e.head[off+int64(n):])
			continue
		}
		i := at / int64(len(one))
		binary.LittleEndian.PutUint32(one, uint32(i/1e6))
		binary.LittleEndian.PutUint32(one[4:], uint32(i%1e6*1000))
		n += copy(p[n:], one[at%int64(len(one)):])
	}
	return n, nil
}

// A million packets of a file of a gigabyte cost less than 256 KiB of memory
// altogether.
func TestBoundedMemory(t *testing.T) {
	one := write(t, frames(2), PCAP, true, 1500)
	first := 16 + int(le.Uint32(one[24+8:]))
	e := endless{one[:24], one[24 : 24+first]}
	tr := open(t, one, Spec{})
	tr.held, tr.file, tr.sec0, tr.ps0 = nil, e, 0, 0
	tr.size = 24 + int64(first)*(1<<30/int64(first))
	buf := make([]nodes.Packet, 0, 1024)
	var before, after runtime.MemStats
	runtime.ReadMemStats(&before)
	s := source(t, Config{Trace: tr})
	total := 0
	for end := des.Millisecond; total < 1_000_000; end += des.Millisecond {
		buf = s.Emit(end, buf[:0])
		total += len(buf)
		if len(buf) != 1000 {
			t.Fatalf("%d packets in a millisecond, want 1000; %v", len(buf), s.Err())
		}
	}
	runtime.ReadMemStats(&after)
	if got := after.TotalAlloc - before.TotalAlloc; got > 256<<10 {
		t.Errorf("%d bytes allocated for %d packets", got, total)
	}
}

func BenchmarkEmit(b *testing.B) {
	for name, tr := range kinds(b) {
		b.Run(name, func(b *testing.B) {
			s := source(b, Config{Trace: tr, Class: 1, Loop: true})
			buf := make([]nodes.Packet, 0, 4096)
			b.ReportAllocs()
			step, end, n := tr.Period()/10, des.Time(0), 0
			for n < b.N {
				end += step
				buf = s.Emit(end, buf[:0])
				n += len(buf)
			}
		})
	}
}
