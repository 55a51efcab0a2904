package replay

import (
	"fmt"
	"strings"
)

// Fault is what is wrong with a file, and where.
type Fault struct {
	File      string
	Packet    int64  // of a capture, from 1; 0 if it is about none
	Line, Col int    // of a table, from 1; 0 if it is about none
	Field     string // such as "captured length" or "time"; may be empty
	Msg       string // what is wrong
	Hint      string // what to do instead; may be empty
}

// Where names the packet and the field, such as "packet 3: time: "; a row is
// left to Line and Col.
func (f *Fault) Where() string {
	var b strings.Builder
	if f.Packet > 0 {
		fmt.Fprintf(&b, "packet %d: ", f.Packet)
	}
	if f.Field != "" {
		b.WriteString(f.Field + ": ")
	}
	return b.String()
}

// Error joins the parts as "file:line:column: packet: field: what; hint".
func (f *Fault) Error() string {
	s := f.File
	if f.Line > 0 {
		s += fmt.Sprintf(":%d:%d", f.Line, f.Col)
	}
	s += ": " + f.Where() + f.Msg
	if f.Hint != "" {
		s += "; " + f.Hint
	}
	return s
}

// fault is a Fault whose file and place are still to be filled in.
func fault(field, hint, format string, args ...any) *Fault {
	return &Fault{Field: field, Hint: hint, Msg: fmt.Sprintf(format, args...)}
}
