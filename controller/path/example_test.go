package path_test

import (
	"fmt"

	"ferrule/controller/path"
)

// A working and a protecting route that share neither a site nor a duct.
func ExampleFinder_DisjointPair() {
	const duct = 0
	g := path.NewGraph(4, []path.Edge{
		{A: 0, B: 1, Cost: 10, Groups: []int32{duct}},
		{A: 1, B: 3, Cost: 10},
		{A: 0, B: 2, Cost: 11, Groups: []int32{duct}},
		{A: 2, B: 3, Cost: 11},
		{A: 0, B: 3, Cost: 40},
	})
	f := path.NewFinder(g)
	var p path.Pair
	for _, how := range []path.Apart{path.ApartNodes, path.ApartNodes | path.ApartGroups} {
		ok := f.DisjointPair(&path.Query{From: 0, To: 3}, how, &p)
		fmt.Println(ok, p.Working.Nodes, p.Working.Cost, p.Protect.Nodes, p.Protect.Cost, p.Exact)
	}
	// Output:
	// true [0 1 3] 20 [0 2 3] 22 true
	// true [0 1 3] 20 [0 3] 40 true
}
