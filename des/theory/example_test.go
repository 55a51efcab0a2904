package theory_test

import (
	"fmt"

	"ferrule/des/theory"
)

// A 10 Mbit/s link with packets of 1000 B on average, 80 % loaded: times are in
// milliseconds, so rates are per millisecond.
func Example() {
	q := theory.MM1{Lambda: 1.0, Mu: 1.25}
	fmt.Printf("mean wait %.1f ms, p99 %.1f ms\n", q.MeanWait(), q.WaitQuantile(0.99))
	d := theory.MD1{Lambda: 1.0, D: 0.8}
	fmt.Printf("of constant size: %.1f ms, p99 %.1f ms\n", d.MeanWait(), d.WaitQuantile(0.99))
	// Output:
	// mean wait 3.2 ms, p99 17.5 ms
	// of constant size: 1.6 ms, p99 8.3 ms
}

// Sixteen slots, two classes of circuit: what each loses.
func ExampleKaufmanRoberts() {
	refused, occupied := theory.KaufmanRoberts(16, []theory.RateClass{{Erlangs: 4, Units: 1}, {Erlangs: 1, Units: 4}})
	fmt.Printf("%.4f %.4f, %.2f slots taken\n", refused[0], refused[1], occupied)
	// Output:
	// 0.0188 0.1152, 7.46 slots taken
}
