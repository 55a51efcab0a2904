package workloads_test

import (
	"fmt"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/workloads"
)

// Two calls of G.711 send 200 bytes every 20 ms each, at phases of their own.
func ExampleNewVoice() {
	v, err := workloads.NewVoice(workloads.VoiceConfig{
		Common: workloads.Common{Name: "voice.tarn.ness", Load: 160 * nodes.Kbps},
	})
	if err != nil {
		panic(err)
	}
	packets := v.Emit(40*des.Millisecond, nil)
	for _, p := range packets {
		fmt.Println(p.Seq, "call", p.Flow, p.Size, "B")
	}
	fmt.Println(packets[2].Born-packets[0].Born, v.MeanRate(), "bit/s")
	// Output:
	// 0 call 1 200 B
	// 1 call 0 200 B
	// 2 call 1 200 B
	// 3 call 0 200 B
	// 20ms 160000 bit/s
}

// A change of load moves packets closer together and draws nothing anew.
func ExampleStream_Scale() {
	s, err := workloads.NewStream(workloads.StreamConfig{
		Common: workloads.Common{Name: "web.tarn.ness", Load: 8 * nodes.Mbps},
		Gaps:   workloads.Constant,
	})
	if err != nil {
		panic(err)
	}
	before := len(s.Emit(des.Second, nil)) // 1000 B every millisecond
	s.Scale(des.Second, 1.5)
	fmt.Println(before, len(s.Emit(2*des.Second, nil)))
	// Output: 1000 1500
}
