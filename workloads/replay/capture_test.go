package replay

import (
	"bytes"
	"encoding/hex"
	"errors"
	"fmt"
	"net"
	"net/netip"
	"strings"
	"testing"
	"time"

	"github.com/gopacket/gopacket"
	"github.com/gopacket/gopacket/layers"
	"github.com/gopacket/gopacket/pcapgo"

	"ferrule/des"
	"ferrule/nodes"
)

// nanos is a little-endian pcap file with nanoseconds, Ethernet, snap length
// 64: IPv4, then IPv6 in a VLAN, then IPv4 under MPLS. The addresses are those
// for documentation (RFC 5737, RFC 3849).
const nanos = `4d3cb2a1020004000000000000000000400000000100000000f1536515cd5b07
2a000000d6000000020000000002020000000001080045b800c8000100004011
8d35c0000201c6336402138c138c00b4000000f15365c1da5b073a0000002605
00000200000000020200000000018100806486dd6881234504ec114020010db8
00000000000000000000000120010db800000000000000000000000201f15365
050000002e000000520200000200000000020200000000018847186a1b3f4528
02400001000040118c4dc0000201c6336402138c138c022c0000`

// blocks is a little-endian pcapng file of one raw IP packet.
const blocks = `0a0d0d0a1c0000004d3c2b1a01000000ffffffffffffffff1c00000001000000
2000000065000000000000000900010009000000000000002000000006000000
3800000000000000fe9c971715cd853d150000003c00000045b8003c00010000
40118dc1c0000201c63364021300000038000000`

func bytesOf(t testing.TB, text string) []byte {
	t.Helper()
	b, err := hex.DecodeString(strings.ReplaceAll(text, "\n", ""))
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// found is what is read of a packet.
type found struct {
	sec, ps  int64
	captured int
	line     uint32
	what     verdict
	dscp     uint8
	size     uint16
	from     string
}

// all reads a capture from end to end.
func all(b []byte) (out []found, bad *Fault) {
	c := capture{window: newWindow(nil, int64(len(b)), b), ng: b[0] == 0x0a}
	if bad = c.begin(); bad != nil {
		return nil, bad
	}
	var p raw
	for {
		ok, bad := c.next(&p)
		if !ok || bad != nil {
			return out, bad
		}
		var h head
		what := h.parse(p.link, p.b, p.line)
		var a [16]byte
		be.PutUint64(a[:], h.from.hi)
		be.PutUint64(a[8:], h.from.lo)
		out = append(out, found{p.sec, p.ps, len(p.b), p.line, what, h.dscp, h.size, netip.AddrFrom16(a).Unmap().String()})
	}
}

// The two files were laid out by hand after the IETF drafts on pcap and pcapng,
// RFC 791, RFC 8200, RFC 3032 and IEEE 802.1Q; the values were chosen.
func TestFilesByHand(t *testing.T) {
	for _, x := range []struct {
		text string
		want []found
	}{
		{nanos, []found{
			{1700000000, 123456789_000, 42, 214, isIP, 46, 200, "192.0.2.1"},
			{1700000000, 123460289_000, 58, 1318, isIP, 34, 1300, "2001:db8::1"},
			{1700000001, 5_000, 46, 594, isIP, 10, 576, "192.0.2.1"},
		}},
		{blocks, []found{{1700000000, 123456789_000, 21, 60, isIP, 46, 60, "192.0.2.1"}}},
	} {
		got, bad := all(bytesOf(t, x.text))
		if bad != nil || fmt.Sprint(got) != fmt.Sprint(x.want) {
			t.Errorf("%v, %v, want %v", got, bad, x.want)
		}
	}
}

// The first file gives three classes by their code points: 200, 1300 and 576 B
// in 0.876543216 s. Its period is that and the mean of two gaps.
func TestOpen(t *testing.T) {
	tr := open(t, bytesOf(t, nanos), Spec{Classes: []string{"a", "b", "c"}, DSCP: []uint8{46, 34, 10}})
	if got, want := tr.Span(), 876_543_216*des.Nanosecond; got != want || tr.Period() != want*3/2 {
		t.Errorf("span %v, period %v, want %v and half as much again", got, tr.Period(), want)
	}
	for c, want := range []int64{200, 1300, 576} {
		for d := range nodes.Direction(2) {
			if got := tr.Share(nodes.ClassID(c), d); got != (Share{1, want}) {
				t.Errorf("class %d: %v, want one packet of %d B", c, got, want)
			}
		}
	}
	if got := tr.Counts(); got != (Counts{Packets: 3}) || tr.Format() != PCAP {
		t.Errorf("%+v, format %d", got, tr.Format())
	}
}

func open(t testing.TB, b []byte, s Spec) *Trace {
	t.Helper()
	if s.Classes == nil {
		s.Classes, s.DSCP = []string{"any"}, nil
		s.Rules = []Rule{{DSCP: nodes.None}}
	}
	s.Name = "file"
	tr, err := Open(bytes.NewReader(b), int64(len(b)), s)
	if err != nil {
		t.Fatal(err)
	}
	return tr
}

// frame is a packet as another library writes it.
type frame struct {
	at          time.Time
	labels, tag bool
	v6          bool
	dscp        uint8
	from        string
	bytes       int // IP
}

// serialize writes the frame with its headers.
func (f *frame) serialize(t testing.TB) []byte {
	t.Helper()
	eth := &layers.Ethernet{SrcMAC: net.HardwareAddr{2, 0, 0, 0, 0, 1}, DstMAC: net.HardwareAddr{2, 0, 0, 0, 0, 2}}
	kind := layers.EthernetTypeIPv4
	if f.v6 {
		kind = layers.EthernetTypeIPv6
	}
	if f.labels {
		kind = layers.EthernetTypeMPLSUnicast
	}
	stack := []gopacket.SerializableLayer{eth}
	eth.EthernetType = kind
	if f.tag {
		eth.EthernetType = layers.EthernetTypeQinQ
		stack = append(stack, &layers.Dot1Q{VLANIdentifier: 7, Type: layers.EthernetTypeDot1Q}, &layers.Dot1Q{VLANIdentifier: 9, Type: kind})
	}
	if f.labels {
		stack = append(stack, &layers.MPLS{Label: 16, TTL: 9}, &layers.MPLS{Label: 17, StackBottom: true, TTL: 9})
	}
	udp := &layers.UDP{SrcPort: 5000, DstPort: 6000}
	if f.v6 {
		stack = append(stack, &layers.IPv6{Version: 6, TrafficClass: f.dscp << 2, NextHeader: layers.IPProtocolUDP, HopLimit: 9,
			SrcIP: net.ParseIP(f.from), DstIP: net.ParseIP("2001:db8::99")}, udp, gopacket.Payload(make([]byte, f.bytes-48)))
	} else {
		stack = append(stack, &layers.IPv4{Version: 4, TOS: f.dscp << 2, Protocol: layers.IPProtocolUDP, TTL: 9,
			SrcIP: net.ParseIP(f.from).To4(), DstIP: net.IP{198, 51, 100, 9}}, udp, gopacket.Payload(make([]byte, f.bytes-28)))
	}
	b := gopacket.NewSerializeBuffer()
	if err := gopacket.SerializeLayers(b, gopacket.SerializeOptions{FixLengths: true}, stack...); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// frames are of every kind, 1.25 ms apart.
func frames(n int) []frame {
	out := make([]frame, n)
	for i := range out {
		f := &out[i]
		*f = frame{at: time.Unix(1_700_000_000, int64(i)*1_250_000), labels: i%5 == 1, tag: i%3 == 1, v6: i%2 == 1, dscp: uint8(i % 64), bytes: 60 + 97*i%1400}
		f.from = fmt.Sprintf("192.0.2.%d", i%7)
		if f.v6 {
			f.from = fmt.Sprintf("2001:db8::%d", 1+i%7)
		}
	}
	return out
}

// write has pcapgo write frames; snap bytes of each are captured.
func write(t testing.TB, fs []frame, format Format, nano bool, snap int) []byte {
	t.Helper()
	var b bytes.Buffer
	var put func(gopacket.CaptureInfo, []byte) error
	flush := func() error { return nil }
	switch {
	case format == PCAPNG:
		w, err := pcapgo.NewNgWriter(&b, layers.LinkTypeEthernet)
		if err != nil {
			t.Fatal(err)
		}
		put, flush = w.WritePacket, w.Flush
	case nano:
		w := pcapgo.NewWriterNanos(&b)
		if err := w.WriteFileHeader(uint32(snap), layers.LinkTypeEthernet); err != nil {
			t.Fatal(err)
		}
		put = w.WritePacket
	default:
		w := pcapgo.NewWriter(&b)
		if err := w.WriteFileHeader(uint32(snap), layers.LinkTypeEthernet); err != nil {
			t.Fatal(err)
		}
		put = w.WritePacket
	}
	for i := range fs {
		data := fs[i].serialize(t)
		cut := data[:min(snap, len(data))]
		if err := put(gopacket.CaptureInfo{Timestamp: fs[i].at, CaptureLength: len(cut), Length: len(data)}, cut); err != nil {
			t.Fatal(err)
		}
	}
	if err := flush(); err != nil {
		t.Fatal(err)
	}
	return b.Bytes()
}

// What gopacket writes is read as it was meant, whole and cut off.
func TestFilesOfAnotherWriter(t *testing.T) {
	fs := frames(200)
	for _, x := range []struct {
		format Format
		nano   bool
		snap   int
	}{{PCAP, true, 65535}, {PCAP, false, 96}, {PCAPNG, true, 96}, {PCAPNG, true, 65535}} {
		got, bad := all(write(t, fs, x.format, x.nano, x.snap))
		if bad != nil || len(got) != len(fs) {
			t.Fatalf("%+v: %d packets, %v", x, len(got), bad)
		}
		for i, g := range got {
			f := &fs[i]
			if g.what != isIP || g.dscp != f.dscp || int(g.size) != f.bytes || g.from != f.from ||
				g.sec != f.at.Unix() || g.ps != int64(f.at.Nanosecond())*1000 {
				t.Fatalf("%+v: packet %d is %+v, want %+v", x, i, g, *f)
			}
		}
	}
}

// The other byte order: the same file with its header words turned round.
func TestBigEndian(t *testing.T) {
	b := bytesOf(t, nanos)
	turn := func(at, n int) {
		for i := range n / 2 {
			b[at+i], b[at+n-1-i] = b[at+n-1-i], b[at+i]
		}
	}
	for _, x := range [][2]int{{0, 4}, {4, 2}, {6, 2}, {8, 4}, {12, 4}, {16, 4}, {20, 4}} {
		turn(x[0], x[1])
	}
	for at := 24; at < len(b); {
		n := int(le.Uint32(b[at+8:]))
		for i := range 4 {
			turn(at+4*i, 4)
		}
		at += 16 + n
	}
	want, _ := all(bytesOf(t, nanos))
	if got, bad := all(b); bad != nil || fmt.Sprint(got) != fmt.Sprint(want) {
		t.Errorf("%v, %v, want %v", got, bad, want)
	}
}

// Parts of a second of every size come out to the picosecond: 2^-20 s is
// 953,674.31640625 ps.
func TestTimeResolutions(t *testing.T) {
	for _, x := range []struct {
		resol   uint8
		n       uint64
		sec, ps int64
	}{
		{6, 5_000_007, 5, 7_000_000}, {9, 5_000_000_007, 5, 7_000}, {0, 12, 12, 0}, {12, 3e12 + 1, 3, 1}, {15, 2e15 + 4999, 2, 4},
		{0x80 | 20, 3<<20 + 1, 3, 953_674}, {0x80, 9, 9, 0}, {0x80 | 63, 1<<63 + 1<<62, 1, 5e11},
	} {
		l := ngLink{resol: x.resol}
		if sec, ps := l.time(x.n); sec != x.sec || ps != x.ps {
			t.Errorf("%#x: %d is %d s %d ps, want %d s %d ps", x.resol, x.n, sec, ps, x.sec, x.ps)
		}
	}
}

// Rules take the first that fits: code point, sender, receiver, way.
func TestRules(t *testing.T) {
	fs := frames(140)
	b := write(t, fs, PCAP, true, 96)
	tr := open(t, b, Spec{Classes: []string{"a", "b", "c"}, Rules: []Rule{
		{DSCP: 1, Class: 0},
		{DSCP: nodes.None, From: netip.MustParsePrefix("192.0.2.2/32"), Class: 1, Ways: OutOnly},
		{DSCP: nodes.None, From: netip.MustParsePrefix("2001:db8::/125"), To: netip.MustParsePrefix("2001:db8::/32"), Class: 2, Ways: BackOnly},
	}})
	want := make([][2]Share, 3)
	none := int64(0)
	for i := range fs {
		f := &fs[i]
		class, dirs := -1, []int{0, 1}
		switch {
		case f.dscp == 1:
			class = 0
		case f.from == "192.0.2.2":
			class, dirs = 1, dirs[:1]
		case f.v6 && f.from != "2001:db8::8":
			class, dirs = 2, dirs[1:]
		default:
			none++
			continue
		}
		for _, d := range dirs {
			want[class][d].Packets++
			want[class][d].Bytes += int64(f.bytes)
		}
	}
	for c := range want {
		for d := range nodes.Direction(2) {
			if got := tr.Share(nodes.ClassID(c), d); got != want[c][d] {
				t.Errorf("class %d, direction %d: %v, want %v", c, d, got, want[c][d])
			}
		}
	}
	if got := tr.Counts().Unassigned; got != none || none == 0 {
		t.Errorf("%d packets without a class, want %d", got, none)
	}
}

// Each fault is one line that says where it is.
func TestFaultsOfCaptures(t *testing.T) {
	change := func(text string, at int, to ...byte) []byte {
		b := bytesOf(t, text)
		copy(b[at:], to)
		return b
	}
	whole := bytesOf(t, nanos)
	back := bytes.Clone(whole)
	back[24] = 0xff // the first packet is later than the others
	for _, x := range []struct {
		name string
		b    []byte
		want string
	}{
		{"empty", nil, "file: the file is empty; name a file with something in it"},
		{"nothing", []byte("hello\n"), "file: the file is no capture and no table"},
		{"header", whole[:20], "file: the file ends within the header of the file"},
		{"no packets", whole[:24], "file: the file holds no packets"},
		{"record header", whole[:30], "file: packet 1: the file ends within the header of the packet"},
		{"record", whole[:len(whole)-1], "file: packet 3: the file ends within the packet"},
		{"captured", change(nanos, 32, 0, 0, 16), "file: packet 1: captured length: 1048576 bytes are more than 262144"},
		{"fraction", change(nanos, 28, 0xff, 0xff, 0xff, 0xff), "file: packet 1: time: 4294967295 parts of a second are more than the 1000000000"},
		{"link", change(nanos, 20, 200), "file: link type: 200 is not known"},
		{"version", change(nanos, 4, 9), "file: version: 9 is not known"},
		{"far", change(nanos, 24, 0, 0, 0, 0), "file: packet 2: time: is more than 31 days from another packet"},
		{"one time", bytesOf(t, blocks), "file: all packets bear one time"},
		{"blocks short", bytesOf(t, blocks)[:100], "file: packet 1: the file ends within a block"},
		{"block length", change(blocks, 64, 0x39), "file: packet 1: block length: 57 is not a multiple of 4 from 12"},
		{"block end", change(blocks, 112, 0x3c), "file: packet 1: block length: is given as 56 before the block and otherwise behind it"},
		{"interface", change(blocks, 68, 3), "file: packet 1: interface: 3 was not described before"},
		{"block captured", change(blocks, 80, 200), "file: packet 1: captured length: 200 bytes do not fit into a block of 56"},
		{"resolution", change(blocks, 48, 99), "file: packet 1: time resolution: 0x63 is too fine"},
		{"option", change(blocks, 46, 0xff, 0xff), "file: packet 1: option: option 9 is longer than its block"},
		{"order", change(blocks, 8, 0), "file: packet 1: byte order:"},
	} {
		tr, err := Open(bytes.NewReader(x.b), int64(len(x.b)), Spec{Name: "file", Classes: []string{"any"}, Rules: []Rule{{DSCP: nodes.None}}})
		var f *Fault
		if tr != nil || !errors.As(err, &f) || !strings.HasPrefix(err.Error(), x.want) || strings.Contains(err.Error(), "\n") {
			t.Errorf("%s: %v, want %s", x.name, err, x.want)
		}
	}
}

// Packets in slight disorder are sent in order; a file turned round is refused.
func TestDisorder(t *testing.T) {
	fs := frames(2000)
	for i := 0; i+8 < len(fs); i += 10 {
		fs[i], fs[i+8] = fs[i+8], fs[i]
	}
	tr := open(t, write(t, fs, PCAPNG, true, 96), Spec{})
	if got := tr.Counts().Disordered; got == 0 {
		t.Error("no disorder was seen")
	}
	s := source(t, Config{Trace: tr})
	ps := s.Emit(des.Hour, nil)
	if len(ps) != len(fs) {
		t.Fatalf("%d packets, want %d", len(ps), len(fs))
	}
	for i := range ps {
		if want := des.Time(i) * 1250 * des.Microsecond; ps[i].Born != want {
			t.Fatalf("packet %d at %v, want %v", i, ps[i].Born, want)
		}
	}
	fs = frames(2000)
	for i, j := 0, len(fs)-1; i < j; i, j = i+1, j-1 {
		fs[i], fs[j] = fs[j], fs[i]
	}
	b := write(t, fs, PCAP, true, 96)
	_, err := Open(bytes.NewReader(b), int64(len(b)), Spec{Name: "file", Classes: []string{"any"}, Rules: []Rule{{DSCP: nodes.None}}})
	if err == nil || err.Error() != "file: packet 513: time: stands 512 packets or more behind its place; sort the file by time" {
		t.Errorf("turned round: %v", err)
	}
}

// source makes a source or fails.
func source(t testing.TB, c Config) *Source {
	t.Helper()
	s, err := NewSource(c)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// FuzzCapture holds Open to a fault or a trace that can be sent, in bounded time.
func FuzzCapture(f *testing.F) {
	f.Add(bytesOf(f, nanos))
	f.Add(bytesOf(f, blocks))
	f.Add(write(f, frames(20), PCAPNG, true, 96))
	f.Add([]byte("time,bytes,class\n0,40,any\n1.5,1500,any\n"))
	f.Add([]byte("start,end,bytes,packets,from,to,dscp\n0,2,3000,3,192.0.2.1,192.0.2.2,0\n"))
	f.Fuzz(func(t *testing.T, b []byte) {
		tr, err := Open(bytes.NewReader(b), int64(len(b)), Spec{Name: "file", Classes: []string{"any"}, Rules: []Rule{{DSCP: nodes.None}}})
		if err != nil {
			var bad *Fault
			if !errors.As(err, &bad) {
				t.Fatalf("%T", err)
			}
			return
		}
		s, err := NewSource(Config{Trace: tr})
		if err != nil {
			return
		}
		last := des.Time(0)
		sent := int64(0)
		for range 2000 {
			at := s.Next()
			if at == des.Never {
				break
			}
			for _, p := range s.Emit(at+1, nil) {
				if p.Born < last || p.Size == 0 {
					t.Fatalf("%+v after %v", p, last)
				}
				last = p.Born
				sent++
			}
			if sent > 2000 {
				return
			}
		}
		if s.Err() != nil || s.Next() == des.Never && sent != tr.Share(0, nodes.Out).Packets {
			t.Fatalf("%d packets sent of %d: %v", sent, tr.Share(0, nodes.Out).Packets, s.Err())
		}
	})
}
