package workloads

import (
	"encoding/binary"
	"fmt"
	"hash/fnv"
	"slices"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
)

// sources lists one source of each kind, in a fixed order.
func sources(t testing.TB) []struct {
	name string
	s    Source
	span des.Time
} {
	common := func(load nodes.Rate) Common { return Common{Load: load, Seed: 42} }
	short := random.Spec{Kind: random.Exponential, Mean: 2}
	return []struct {
		name string
		s    Source
		span des.Time
	}{
		{"poisson mix", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Size: imix}), 10 * des.Millisecond},
		{"poisson exponential", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Size: random.Spec{Kind: random.Exponential, Mean: 700}}), 10 * des.Millisecond},
		{"poisson gamma", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Size: random.Spec{Kind: random.Gamma, Mean: 700, CoV: 0.4}}), 10 * des.Millisecond},
		{"constant", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Gaps: Constant}), 10 * des.Millisecond},
		{"poisson flows", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Flows: 4096}), 10 * des.Millisecond},
		{"constant flows", streamOf(t, StreamConfig{Common: common(nodes.Gbps), Gaps: Constant, Flows: 300}), 10 * des.Millisecond},
		{"standing calls", voiceOf(t, VoiceConfig{Common: common(8 * nodes.Mbps)}), des.Second},
		{"random calls", voiceOf(t, VoiceConfig{Common: common(8 * nodes.Mbps), Pattern: Random, Hold: short}), des.Second},
		{"regular calls", voiceOf(t, VoiceConfig{Common: common(8 * nodes.Mbps), Pattern: Regular, Hold: short}), des.Second},
		{"video", videoOf(t, VideoConfig{Common: common(80 * nodes.Mbps)}), 500 * des.Millisecond},
		{"random video", videoOf(t, VideoConfig{Common: common(80 * nodes.Mbps), Pattern: Random, Hold: short}), 500 * des.Millisecond},
		{"regular video", videoOf(t, VideoConfig{Common: common(80 * nodes.Mbps), Pattern: Regular, Hold: short}), 500 * des.Millisecond},
		{"files", filesOf(t, FilesConfig{Common: common(200 * nodes.Mbps)}), 200 * des.Millisecond},
		{"on-off", onOffOf(t, OnOffConfig{Common: common(200 * nodes.Mbps)}), 100 * des.Millisecond},
		{"talk", talkOf(t, TalkConfig{Common: common(16 * nodes.Mbps)}), des.Second},
		{"mmpp", mmppOf(t, MMPPConfig{Common: common(nodes.Gbps), Size: imix, HighFor: des.Millisecond, LowFor: des.Millisecond, Flows: 50}), 10 * des.Millisecond},
		{"pages", pagesOf(t, PagesConfig{Common: common(200 * nodes.Mbps)}), 200 * des.Millisecond},
	}
}

// golden pins what each source sends with seed 42: the number of packets and a
// 64-bit FNV-1a hash of birth, flow and size. A change here changes the results
// of every scenario.
var golden = map[string]string{
	"poisson mix":         "3694 0b35361cf482d609",
	"poisson exponential": "1810 454af6b98dbe65c2",
	"poisson gamma":       "1810 4230aea239d6e0e7",
	"constant":            "1250 e508d00d58a7db86",
	"poisson flows":       "1286 5782ce7a95eb9ef0",
	"constant flows":      "1250 c0dc161beb634ecb",
	"standing calls":      "5000 b6025b4377406c45",
	"random calls":        "4736 216839f446b01e23",
	"regular calls":       "4651 5569a6b01c690fbf",
	"video":               "3378 3fff8da2f14dc982",
	"random video":        "2699 524bc019a6bd8703",
	"regular video":       "3306 92930aa4d9c255ff",
	"files":               "3511 ec210ee4cbc26041",
	"on-off":              "2490 5098a2151f4ead0f",
	"talk":                "10662 20ea52c87f0a4e98",
	"mmpp":                "4471 6b16e6a4ae369363",
	"pages":               "2931 89cc5b3cd594f286",
}

func TestGolden(t *testing.T) {
	for _, x := range sources(t) {
		h := fnv.New64a()
		var b [12]byte
		ps := x.s.Emit(x.span, nil)
		for _, p := range ps {
			binary.LittleEndian.PutUint64(b[:], uint64(p.Born))
			binary.LittleEndian.PutUint16(b[8:], p.Flow)
			binary.LittleEndian.PutUint16(b[10:], p.Size)
			h.Write(b[:])
		}
		if got := fmt.Sprintf("%d %016x", len(ps), h.Sum64()); got != golden[x.name] {
			t.Errorf("%q: %q, want %q", x.name, got, golden[x.name])
		}
	}
}

// Once buffers have grown, packets cost no memory.
func TestEmitAllocatesNothing(t *testing.T) {
	for _, x := range sources(t) {
		buf := make([]nodes.Packet, 0, 100_000)
		end := 4 * x.span
		buf = x.s.Emit(end, buf)
		sent := 0
		n := testing.AllocsPerRun(20, func() {
			end += x.span / 10
			buf = x.s.Emit(end, buf[:0])
			sent += len(buf)
		})
		if n != 0 || sent < 1000 {
			t.Errorf("%s: %v allocations in a call of Emit, %d packets in all", x.name, n, sent)
		}
	}
}

// FuzzCuts sends with calls of Emit that end where data says and compares with
// one call; two bytes scale the load on the way.
func FuzzCuts(f *testing.F) {
	f.Add(uint8(0), uint8(100), uint8(13), []byte{1, 200, 3})
	f.Add(uint8(5), uint8(10), uint8(0), []byte{255, 0, 0, 9})
	f.Add(uint8(7), uint8(200), uint8(30), []byte{40, 40, 40, 1})
	f.Fuzz(func(t *testing.T, which, when, factor uint8, steps []byte) {
		all := sources(t)
		x := all[int(which)%len(all)]
		at := x.span / 256 * des.Time(when)
		whole, pieces := x.s.Clone(), x.s.Clone()
		whole.Scale(at, float64(factor)/10)
		want := whole.Emit(x.span, nil)
		var got []nodes.Packet
		end, scaled := des.Time(0), false
		for _, b := range append(steps, 255) {
			end = min(x.span, end+des.Time(b)*des.Time(b)*x.span/65536)
			if !scaled && end >= at {
				got = pieces.Emit(at, got)
				pieces.Scale(at, float64(factor)/10)
				pieces = pieces.Clone()
				scaled = true
			}
			got = pieces.Emit(end, got)
		}
		if !scaled {
			got = pieces.Emit(at, got)
			pieces.Scale(at, float64(factor)/10)
		}
		if got = pieces.Emit(x.span, got); !slices.Equal(got, want) {
			t.Fatalf("%s: %d packets in pieces, %d in one call, or others", x.name, len(got), len(want))
		}
	})
}
