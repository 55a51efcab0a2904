package path

// A Mask says what a query must not use. The zero value excludes nothing. An
// excluded node is neither passed nor accepted as an end.
type Mask struct {
	Edges, Nodes Set
}

// NewMask returns an empty mask with room for every id of g.
func NewMask(g *Graph) Mask { return Mask{NewSet(g.Edges()), NewSet(g.Nodes())} }

// Clear excludes nothing any more.
func (m *Mask) Clear() {
	m.Edges.Clear()
	m.Nodes.Clear()
}

// ExcludeGroup excludes every edge of a risk group.
func (m *Mask) ExcludeGroup(g *Graph, group int32) {
	for _, e := range g.Members(group) {
		m.Edges.Add(int(e))
	}
}

// Apart says what two routes must not share, besides edges, which they never
// share. Values combine with |.
type Apart uint8

// What must be disjoint.
const (
	ApartEdges  Apart = 0      // edges alone
	ApartNodes  Apart = 1 << 0 // also every node but the two ends asked for
	ApartGroups Apart = 1 << 1 // also every risk group
)

// ExcludeRoute excludes whatever a route from from to to would share with r:
// its edges and, as how says, its nodes other than from and to, and every edge
// that is in a risk group with one of its edges.
func (m *Mask) ExcludeRoute(g *Graph, r *Route, from, to int32, how Apart) {
	for _, e := range r.Edges {
		m.Edges.Add(int(e))
		if how&ApartGroups != 0 {
			for _, group := range g.edges[e].Groups {
				m.ExcludeGroup(g, group)
			}
		}
	}
	if how&ApartNodes != 0 {
		for _, v := range r.Nodes {
			if v != from && v != to {
				m.Nodes.Add(int(v))
			}
		}
	}
}

// Shares reports whether a and b, both from the same node to the same other
// node, share an edge or, as how says, a node between the ends or a risk group.
func Shares(g *Graph, a, b *Route, how Apart) bool {
	for _, e := range a.Edges {
		for _, o := range b.Edges {
			if e == o || how&ApartGroups != 0 && sameGroup(g, e, o) {
				return true
			}
		}
	}
	if how&ApartNodes == 0 || len(a.Edges) == 0 || len(b.Edges) == 0 {
		return false
	}
	for _, v := range a.Nodes[1 : len(a.Nodes)-1] {
		for _, w := range b.Nodes[1 : len(b.Nodes)-1] {
			if v == w {
				return true
			}
		}
	}
	return false
}

func sameGroup(g *Graph, e, o int32) bool {
	for _, x := range g.edges[e].Groups {
		for _, y := range g.edges[o].Groups {
			if x == y {
				return true
			}
		}
	}
	return false
}
