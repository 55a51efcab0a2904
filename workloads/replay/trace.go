package replay

import (
	"bytes"
	"crypto/sha256"
	"fmt"
	"io"
	"math"

	"ferrule/des"
	"ferrule/nodes"
)

// Format is how a file holds traffic.
type Format uint8

// The formats. Tables are rows of comma-separated fields without quotes; a
// first row names the fields. Times are seconds since any instant, in decimals;
// sizes are those of IP packets.
const (
	Auto    Format = iota // found from how the file begins
	PCAP                  // classic capture, micro- or nanoseconds, either byte order
	PCAPNG                // capture in blocks
	Packets               // table of time,bytes,class and, if there, flow
	Flows                 // table of start,end,bytes,packets,from,to,dscp
)

// Spec says what a file is and how its packets are given to classes.
type Spec struct {
	Name    string   // of the file, in messages
	Format  Format   // default Auto
	Classes []string // names, by which a table of packets calls them
	DSCP    []uint8  // of the classes; they decide where there are no Rules
	Rules   []Rule   // nil: by DSCP
}

// Limits of a file.
const (
	mostHeld = 8 << 20               // bytes up to which it is held in memory
	mostSpan = int64(31 * 24 * 3600) // seconds
	mostSize = int64(1) << 40        // bytes
	secondPS = int64(des.Second)     // picoseconds of a second
)

// Trace is the traffic of a file. It is read-only, and many sources can send it
// at the same time. The file stays in use, and must stay as it is, as long as
// the trace does.
type Trace struct {
	name    string
	file    io.ReaderAt
	size    int64
	held    []byte // the whole file, if it is small
	format  Format
	classes []string
	rules   []rule
	flows   []flow // in order of start

	sec0, ps0  int64 // the earliest time
	secN, psN  int64 // the latest, of starts
	last       int64 // ps from the earliest to the latest, ends of flows included
	disordered bool
	counts     tally
	sum        [sha256.Size]byte
}

// Counts is what was found in a file.
type Counts struct {
	Packets    int64 // all of them
	NotIP      int64 // of another protocol
	Short      int64 // of which too little was captured to tell
	Malformed  int64 // whose headers contradict each other
	Unassigned int64 // IP packets to which no rule gives a class
	Disordered int64 // whose time is before that of the one before; they are sent in order
}

// tally is what is noted while a file is read for the first time.
type tally struct {
	Counts
	shares  [][2]Share // by class and direction
	ordered sorter     // all times, to see whether a window mends them; of captures and tables of packets
	base    int64      // second from which those times count
	late    int64      // time of the latest packet that left that window
}

// Share is the part of a class.
type Share struct{ Packets, Bytes int64 }

// add counts a packet.
func (c *tally) add(what verdict, class int16, ways uint8, size int64) {
	switch what {
	case isIP:
		c.addMany(class, ways, 1, size)
	case notIP:
		c.NotIP++
	case short:
		c.Short++
	case malformed:
		c.Malformed++
	default:
		panic("replay: no such verdict")
	}
}

// addMany counts IP packets of one class.
func (c *tally) addMany(class int16, ways uint8, packets, bytes int64) {
	if ways == 0 {
		c.Unassigned += packets
		return
	}
	for d := range 2 {
		if ways&(1<<d) != 0 {
			c.shares[class][d].Packets += packets
			c.shares[class][d].Bytes += bytes
		}
	}
}

// Open reads a file of size bytes from end to end. An error is a *Fault.
//
// A file of up to 8 MB is held in memory. Packets may stand up to 511 places
// behind where their times belong; a file in greater disorder is refused, as is
// one whose packets span more than 31 days or no time at all.
func Open(file io.ReaderAt, size int64, s Spec) (*Trace, error) {
	t := &Trace{name: s.Name, file: file, size: size, format: s.Format, classes: s.Classes}
	if bad := t.open(&s); bad != nil {
		bad.File = s.Name
		return nil, bad
	}
	return t, nil
}

// open does what Open says.
func (t *Trace) open(s *Spec) *Fault {
	check(s)
	t.rules = compileRules(s)
	t.counts.shares = make([][2]Share, len(s.Classes))
	switch {
	case t.size <= 0:
		return fault("", "name a file with something in it", "the file is empty")
	case t.size > mostSize:
		return fault("", "cut it into several", "the file has more than 1 TiB")
	case t.size <= mostHeld:
		t.held = make([]byte, t.size)
		if n, err := t.file.ReadAt(t.held, 0); n < len(t.held) {
			return fault("", "", "cannot be read: %v", err)
		}
	}
	h := sha256.New()
	if t.held != nil {
		h.Write(t.held)
	} else if _, err := io.Copy(h, io.NewSectionReader(t.file, 0, t.size)); err != nil {
		return fault("", "", "cannot be read: %v", err)
	}
	h.Sum(t.sum[:0])
	if bad := t.detect(); bad != nil {
		return bad
	}
	if bad := t.scan(); bad != nil {
		return bad
	}
	switch {
	case t.counts.Packets == 0:
		return fault("", "", "the file holds no packets")
	case t.last == 0:
		return fault("", "two packets at two times are the least", "all packets bear one time, so that there is no rate")
	}
	return nil
}

// check panics if a caller made a mistake.
func check(s *Spec) {
	if len(s.Classes) > math.MaxInt16 || len(s.DSCP) > len(s.Classes) {
		panic("replay: too many classes or code points")
	}
	for _, r := range s.Rules {
		if r.Class < 0 || int(r.Class) >= len(s.Classes) || r.DSCP < nodes.None || r.DSCP > 63 {
			panic(fmt.Sprintf("replay: rule %+v", r))
		}
	}
}

// detect finds the format, or checks it.
func (t *Trace) detect() *Fault {
	w := newWindow(t.file, t.size, t.held)
	b := w.peek(mostPeek)
	found := Auto
	if len(b) >= 4 {
		for _, m := range []uint32{le.Uint32(b), be.Uint32(b)} {
			switch m {
			case magicMicro, magicNano:
				found = PCAP
			case magicNG:
				found = PCAPNG
			}
		}
	}
	switch {
	case found != Auto:
	case isText(b, packetHead):
		found = Packets
	case isText(b, flowHead):
		found = Flows
	}
	switch {
	case found == t.format && found != Auto:
		return nil
	case t.format == Auto && found != Auto:
		t.format = found
		return nil
	case t.format == Packets || t.format == Flows:
		return nil // its first row will be complained of
	case found == Auto:
		return fault("", "name a pcap or pcapng file, or a table that begins with "+packetHead[0]+", or "+flowHead[0]+",",
			"the file is no capture and no table")
	}
	return fault("", "leave the format out", "the file is of another format")
}

// scan reads the whole file and counts.
func (t *Trace) scan() *Fault {
	if t.format == Flows {
		return t.readFlows()
	}
	f := newFeed(t, nodes.None, 0) // of which no packet is
	f.counts = &t.counts
	f.counts.ordered.ring = make([]record, orderWindow)
	bad := f.rewind()
	if bad == nil {
		_, bad = f.next(&record{})
	}
	if bad != nil {
		return bad
	}
	t.counts.ordered.ring = nil
	t.disordered = t.counts.Disordered > 0
	t.last = (t.secN-t.sec0)*secondPS + t.psN - t.ps0
	return nil
}

// meet notes the time of packet number n.
func (t *Trace) meet(n, sec, ps int64, c *tally) *Fault {
	c.Packets++
	if n == 1 {
		t.sec0, t.ps0, t.secN, t.psN = sec, ps, sec, ps
	}
	if d := sec - t.sec0; d > mostSpan || sec-t.secN < -mostSpan {
		return fault("", "", "is more than 31 days from another packet")
	}
	if sec < t.sec0 || sec == t.sec0 && ps < t.ps0 {
		t.sec0, t.ps0 = sec, ps
	}
	before := sec < t.secN || sec == t.secN && ps < t.psN
	if before {
		c.Disordered++
	} else {
		t.secN, t.psN = sec, ps
	}
	if c.ordered.ring == nil {
		return nil
	}
	if n == 1 {
		c.base, c.late = sec, math.MinInt64
	}
	at := (sec-c.base)*secondPS + ps
	if c.ordered.full() {
		var r record
		c.ordered.pop(&r)
		c.late = r.at
	}
	if at < c.late {
		return fault("", "sort the file by time", "stands %d packets or more behind its place", orderWindow)
	}
	c.ordered.push(record{at: at})
	return nil
}

// since returns the time since the earliest packet of the file.
func (t *Trace) since(sec, ps int64) int64 { return (sec-t.sec0)*secondPS + ps - t.ps0 }

// Name returns the name of the file.
func (t *Trace) Name() string { return t.name }

// Format returns the format of the file, which is not Auto.
func (t *Trace) Format() Format { return t.format }

// Sum returns the SHA-256 sum of the file.
func (t *Trace) Sum() []byte { return bytes.Clone(t.sum[:]) }

// Counts returns what was found in the file.
func (t *Trace) Counts() Counts { return t.counts.Counts }

// Share returns the packets of a class that a direction sends.
func (t *Trace) Share(c nodes.ClassID, d nodes.Direction) Share { return t.counts.shares[c][d] }

// Span returns the time from the earliest packet to the latest, or to the
// latest end of a flow. It is above 0.
func (t *Trace) Span() des.Time { return des.Time(t.last) }

// Period returns the time after which a loop begins again: the span, and the
// mean distance of packets once more.
func (t *Trace) Period() des.Time {
	return des.Time(t.last + int64(float64(t.last)/float64(t.counts.Packets-1)+0.5))
}

// Load returns the mean rate over a period of what a direction of a class
// sends, in bit/s of IP bytes, at the speed of the file.
func (t *Trace) Load(c nodes.ClassID, d nodes.Direction) float64 {
	return float64(t.Share(c, d).Bytes) * 8 / t.Period().Seconds()
}

// Held reports whether the file is held in memory, so that it can be closed.
func (t *Trace) Held() bool { return t.held != nil || t.flows != nil }

// MeanSize returns the mean size of the packets that have a class, in IP bytes;
// 0 if there are none.
func (t *Trace) MeanSize() float64 {
	var sum Share
	for _, both := range t.counts.shares {
		for _, s := range both {
			sum.Packets += s.Packets
			sum.Bytes += s.Bytes
		}
	}
	if sum.Packets == 0 {
		return 0
	}
	return float64(sum.Bytes) / float64(sum.Packets)
}
