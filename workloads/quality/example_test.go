package quality_test

import (
	"fmt"

	"ferrule/des"
	"ferrule/workloads/quality"
)

// A call through a buffer of 40 ms: one packet in 50 comes too late, the network
// itself takes 25 ms and loses nothing.
func ExampleDejitter() {
	d, err := quality.NewDejitter(quality.DejitterConfig{Depth: 40 * des.Millisecond})
	if err != nil {
		panic(err)
	}
	for i := range uint32(1000) {
		born := des.Time(i) * 20 * des.Millisecond
		delay := 25 * des.Millisecond
		if i%50 == 49 {
			delay = 70 * des.Millisecond
		}
		d.Arrive(i, born, born+delay)
	}
	r := d.Report()
	call := r.Call(quality.CodecG729AVAD, 35*des.Millisecond)
	rating := quality.DefaultLine().Rate(call)
	fmt.Println(r.Played, "played,", r.Late, "late, mouth to ear", call.Delay)
	fmt.Printf("R %.1f, MOS %.2f, good or better for %.0f %%\n", rating.R, quality.MOS(rating.R), 100*quality.GoodOrBetter(rating.R))
	// Output:
	// 980 played, 20 late, mouth to ear 100ms
	// R 74.2, MOS 3.79, good or better for 81 %
}
