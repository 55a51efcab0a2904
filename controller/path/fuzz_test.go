package path

import "testing"

// FuzzAgainstEnumeration reads a small multigraph from bytes and compares
// every algorithm with plain enumeration of all loopless routes.
func FuzzAgainstEnumeration(f *testing.F) {
	f.Add([]byte{3, 0, 0x01, 0x11, 0x12, 0x21, 0x02, 0x33})
	f.Add([]byte{4, 1, 0x01, 0x01, 0x13, 0x11, 0x32, 0x11, 0x02, 0x41, 0x13, 0x42})
	f.Add([]byte{6, 2, 0x01, 0x91, 0x12, 0x80, 0x25, 0xa1, 0x05, 0xc3, 0x51, 0x00})
	f.Fuzz(func(t *testing.T, in []byte) {
		if len(in) < 4 {
			return
		}
		n := 2 + int32(in[0]%5)
		var edges []Edge
		var width []int64
		for b := in[2:]; len(b) >= 2 && len(edges) < 10; b = b[2:] {
			e := Edge{A: int32(b[0]>>4) % n, B: int32(b[0]&15) % n, Cost: int64(b[1] & 7), OneWay: b[1]&8 != 0}
			if e.A == e.B {
				continue
			}
			if b[1]&16 != 0 {
				e.Groups = []int32{int32(b[1]>>5) & 1}
			}
			edges, width = append(edges, e), append(width, int64(b[1]>>6))
		}
		g := NewGraph(int(n), edges)
		finder := NewFinder(g)
		q := Query{From: 0, To: n - 1, By: Objective(in[1] % 3), Width: width, Need: int64(in[1] >> 7)}
		checkKShortest(t, finder, &q, 9)
		checkPair(t, finder, &q, Apart(in[1]>>2&3))
		checkNextHops(t, g)
	})
}
