package nodes

import (
	"testing"
	"unsafe"
)

func TestPacketIs32Bytes(t *testing.T) {
	if n := unsafe.Sizeof(Packet{}); n != 32 {
		t.Errorf("Packet is %d bytes, want 32: two per cache line", n)
	}
}
