package replay

import (
	"bytes"
	"net/netip"
	"strings"
)

// mostLine is how long a line of a table can be.
const mostLine = mostPeek - 2

// table reads the rows of a file of comma-separated fields, without quotes.
// Empty lines and those that begin with # are passed over.
type table struct {
	window
	line int // number of the current one, from 1
	row  []byte
	head []string

	body     int64 // place of the first row behind the head; 0: not known
	bodyLine int   // number of the line before it
}

// The first rows of tables. A field in brackets can be left out.
var (
	packetHead = []string{"time", "bytes", "class", "flow"}
	flowHead   = []string{"start", "end", "bytes", "packets", "from", "to", "dscp"}
)

// next reads the next row. At the end of the file ok is false.
func (t *table) next() (ok bool, f *Fault) {
	for t.left() > 0 {
		b := t.peek(mostLine + 2)
		if t.err != nil {
			return false, t.err
		}
		t.line++
		end := bytes.IndexByte(b, '\n')
		if end < 0 {
			if end = len(b); int64(end) < t.left() {
				return false, t.at(0, fault("", "", "the line is longer than %d bytes", mostLine))
			}
		}
		t.skip(int64(end) + 1)
		b = bytes.TrimSuffix(b[:end], []byte("\r"))
		if t.line == 1 {
			b = bytes.TrimPrefix(b, []byte("\ufeff"))
		}
		if t.row = b; len(b) > 0 && b[0] != '#' {
			return true, nil
		}
	}
	return false, nil
}

// begin reads the first row, which must be that of want; the last of want can
// be left out if less says so.
func (t *table) begin(want []string, less bool) *Fault {
	t.line = 0
	ok, f := t.next()
	if f != nil {
		return f
	}
	text := strings.ReplaceAll(string(t.row), " ", "")
	all := strings.Join(want, ",")
	switch {
	case !ok:
		return fault("", "begin with the row "+all, "the table is empty")
	case text == all:
		t.head = want
	case less && text == strings.Join(want[:len(want)-1], ","):
		t.head = want[:len(want)-1]
	default:
		return t.at(0, fault("", "begin with the row "+all, "the first row is %q", clip(string(t.row))))
	}
	return nil
}

// restart goes to the first row behind the head, the last field of which can be
// left out.
func (t *table) restart(head []string) *Fault {
	t.rewind()
	if t.body > 0 {
		t.skip(t.body)
		t.line = t.bodyLine
		return nil
	}
	bad := t.begin(head, true)
	t.body, t.bodyLine = t.size-t.left(), t.line
	return bad
}

// clip keeps what is quoted short.
func clip(s string) string {
	const most = 60
	if len(s) > most {
		return strings.ToValidUTF8(s[:most], "") + "..."
	}
	return s
}

// at puts a fault at column col of the current line, from 0.
func (t *table) at(col int, f *Fault) *Fault {
	f.Line, f.Col = t.line, col+1
	return f
}

// fields cuts the row into as many fields as the head has and reports their
// columns.
func (t *table) fields(out *[8][]byte, cols *[8]int) *Fault {
	b, at := t.row, 0
	for i := range t.head {
		end := bytes.IndexByte(b[at:], ',')
		last := i == len(t.head)-1
		if last != (end < 0) {
			return t.at(0, fault("", "write "+strings.Join(t.head, ","), "the row has %d fields", bytes.Count(b, []byte(","))+1))
		}
		if last {
			end = len(b) - at
		}
		x := b[at : at+end]
		for len(x) > 0 && x[0] == ' ' {
			x, at, end = x[1:], at+1, end-1
		}
		out[i], cols[i] = bytes.TrimRight(x, " "), at
		at += end + 1
	}
	return nil
}

// bad is the fault of field i of the row.
func (t *table) bad(i int, text []byte, col int, msg, hint string) *Fault {
	f := fault(t.head[i], hint, "%q %s", clip(string(text)), msg)
	return t.at(col, f)
}

// seconds reads a decimal number of seconds exactly.
func seconds(b []byte) (sec, ps int64, ok bool) {
	const most = 1 << 40
	i := 0
	for ; i < len(b) && b[i] != '.'; i++ {
		if b[i] < '0' || b[i] > '9' || sec > most {
			return 0, 0, false
		}
		sec = sec*10 + int64(b[i]-'0')
	}
	if i == 0 || sec > most {
		return 0, 0, false
	}
	if i == len(b) {
		return sec, 0, true
	}
	unit := int64(1e12)
	for i++; i < len(b); i++ {
		if b[i] < '0' || b[i] > '9' || unit == 1 && b[i] != '0' {
			return 0, 0, false
		}
		if unit > 1 {
			unit /= 10
			ps += int64(b[i]-'0') * unit
		}
	}
	return sec, ps, true
}

// number reads a whole number up to most.
func number(b []byte, most int64) (n int64, ok bool) {
	for _, c := range b {
		if c < '0' || c > '9' {
			return 0, false
		}
		if n = n*10 + int64(c-'0'); n > most {
			return 0, false
		}
	}
	return n, len(b) > 0
}

// addrOf converts an address.
func addrOf(a netip.Addr) addr {
	b := a.As16()
	return addr{be.Uint64(b[:8]), be.Uint64(b[8:])}
}
