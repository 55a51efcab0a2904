package nodes

import "testing"

func FuzzLineEqualsDivision(f *testing.F) {
	f.Add(int64(10_000_000_000), uint16(1500))
	f.Add(int64(2_487_900_000), uint16(64))
	f.Add(int64(104_355_975_330), uint16(65535))
	f.Add(int64(1), uint16(1))
	f.Add(int64(3), uint16(65535))
	f.Add(int64(1)<<46, uint16(9000))
	f.Add(int64(1)<<46-1, uint16(1))
	f.Fuzz(func(t *testing.T, r int64, size uint16) {
		if r < 1 || r > 1<<46 {
			return
		}
		l := NewLine(Rate(r))
		for _, n := range []Bytes{Bytes(size), 0, 1, MaxLineSize, Bytes(size) + 26} {
			if got, want := l.TxTime(n), Rate(r).TxTime(n); got != want {
				t.Fatalf("%d B at %d bit/s: %d ps, by division %d ps", n, r, got, want)
			}
		}
	})
}
