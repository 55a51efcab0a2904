package path

import (
	"math/rand/v2"
	"testing"
)

// mesh is a connected random graph of n nodes and 2n edges.
func mesh(n int) *Graph {
	rng := rand.New(rand.NewPCG(3, uint64(n)))
	var edges []Edge
	for i := range n {
		edges = append(edges, Edge{A: int32(i), B: int32((i + 1) % n), Cost: int64(1 + rng.IntN(1000))})
		a := rng.IntN(n)
		b := (a + 1 + rng.IntN(n-1)) % n
		edges = append(edges, Edge{A: int32(a), B: int32(b), Cost: int64(1 + rng.IntN(1000))})
	}
	return NewGraph(n, edges)
}

func BenchmarkShortest(b *testing.B) {
	f := NewFinder(mesh(100))
	var r Route
	i := int32(0)
	for b.Loop() {
		f.Shortest(&Query{From: i % 100, To: (i*7 + 13) % 100}, &r)
		i++
	}
}

// All routing tables of 100 sites.
func BenchmarkNextHopsAllDestinations(b *testing.B) {
	f := NewFinder(mesh(100))
	var hops NextHops
	for b.Loop() {
		for dst := range int32(100) {
			f.NextHops(dst, Mask{}, &hops)
		}
	}
}

func BenchmarkKShortest10(b *testing.B) {
	f := NewFinder(mesh(100))
	var routes []Route
	for b.Loop() {
		routes = f.KShortest(&Query{From: 0, To: 50}, 10, routes)
	}
}

func BenchmarkDisjointPair(b *testing.B) {
	f := NewFinder(mesh(100))
	var p Pair
	for b.Loop() {
		f.DisjointPair(&Query{From: 0, To: 50}, ApartNodes, &p)
	}
}

func BenchmarkChannels(b *testing.B) {
	r := Route{Nodes: []int32{0, 1, 2, 3}, Edges: []int32{0, 1, 2}}
	free := []Set{setOf(1, 80), setOf(2, 80), setOf(3, 80)}
	var out []int32
	for b.Loop() {
		out, _ = Channels(&r, free, nil, out[:0])
	}
}
