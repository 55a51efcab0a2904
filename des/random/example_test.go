package random_test

import (
	"fmt"

	"ferrule/des/random"
)

// A keyed draw belongs to what it is about: the second call of the same key
// gives the same value, whatever was drawn in between.
func ExampleDraw() {
	const quantity = 1 // such as: the latency of a command
	site := random.Hash("tarn")
	law, err := random.Spec{Kind: random.Lognormal, Median: 0.010, P95: 0.050}.Law()
	if err != nil {
		fmt.Println(err)
		return
	}
	first := law.At(random.Unit(random.Draw(1, site, 0, quantity)))
	other := law.At(random.Unit(random.Draw(1, site, 1, quantity)))
	again := law.At(random.Unit(random.Draw(1, site, 0, quantity)))
	fmt.Println(first == again, first == other)
	// Output: true false
}

// Copying a stream clones it.
func ExampleStream() {
	a := random.NewStream(1, "aggregate/video-tn.out/gap")
	b := a
	fmt.Println(a.Exp() == b.Exp(), a.Uint64() == b.Uint64())
	// Output: true true
}
