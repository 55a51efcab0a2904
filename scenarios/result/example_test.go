package result_test

import (
	"fmt"
	"os"

	"ferrule/scenarios/result"
)

// A study lists the figures of an outcome to fold them over seeds; what cannot
// be said is not listed.
func ExampleOutcome_Figures() {
	o := result.Outcome{
		OfferedPackets: 2000, DeliveredPackets: 1999,
		LostPackets: result.Losses{{Cause: "queue", Packets: 1}},
		LossRatio:   new(0.0005),
		DelayS:      result.Distribution{P99: new(0.0123)}, // too few packets for P999
	}
	for _, v := range o.Figures() {
		fmt.Println(v.Figure, v.Value, v.Unit)
	}
	// Output:
	// offered 2000 packets
	// delivered 1999 packets
	// duplicates 0 packets
	// inside 0 packets
	// lost-queue 1 packets
	// loss 0.0005 ratio
	// delay-p99 0.0123 s
}

// The long table has one row for each figure.
func ExampleWriteCSV() {
	c := &result.Check{Links: []result.Link{{Circuit: "th", From: "tarn", To: "holm", LoadBps: 9e8, PayloadBps: 1.2e9, Utilisation: new(0.75)}}}
	if err := result.WriteCSV(os.Stdout, c); err != nil {
		fmt.Println(err)
	}
	// Output:
	// scope,name,period,figure,unit,value
	// link,th from tarn,,load,bit/s,9e+08
	// link,th from tarn,,payload,bit/s,1.2e+09
	// link,th from tarn,,utilisation,ratio,0.75
	// estimate,,,packet-hops,packets,0
	// estimate,,,memory,B,0
}
