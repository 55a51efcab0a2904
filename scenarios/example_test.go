package scenarios_test

import (
	"fmt"

	"ferrule/scenarios"
)

// A file with two faults: both are reported, with their places.
func ExampleLoad() {
	_, err := scenarios.Load("coast.yaml", []byte(`
scenario: coast
run: { length: 10 sec, warm-up: 1s }
classes: [ { name: gold } ]
sites: [ { name: tarn }, { name: holm } ]
fibres: [ { between: [tarn, hlom], length: 310km } ]
`), nil, nil)
	fmt.Println(err)
	// Output:
	// coast.yaml:3:16: run.length: "10 sec" has no unit that is known; write 10s
	// coast.yaml:6:29: fibres.tarn-hlom.between[1]: no site is called "hlom"; did you mean "holm"?
}
