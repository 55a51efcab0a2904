package packet

import (
	"ferrule/des"
	"ferrule/nodes"
)

// DefaultJoinBelow is the light delay below which two sites share a region, so
// that windows between regions stay long.
const DefaultJoinBelow = 200 * des.Microsecond

// region is a site, or several close together that advance in small windows of
// their own inside the kernel's.
type region struct {
	net   *Network
	sites []*Site
	inner des.Time // least delay between its sites
}

// Next implements des.Region.
func (r *region) Next() des.Time {
	t := des.Never
	for _, s := range r.sites {
		t = min(t, s.nextWork())
	}
	return t
}

// Run implements des.Region.
func (r *region) Run(end des.Time) {
	if len(r.sites) == 1 {
		r.sites[0].run(end)
		return
	}
	for {
		from := r.Next()
		if from >= end {
			return
		}
		stop := min(end, from.Plus(min(r.inner, maxWindow)))
		for _, s := range r.sites {
			s.run(stop)
		}
		r.handOver(stop)
	}
}

// handOver passes on what stays inside the region; the rest waits for the edge.
func (r *region) handOver(now des.Time) {
	n := r.net
	for _, s := range r.sites {
		keep := s.fresh[:0]
		for _, p := range s.fresh {
			if n.regionOf[p.to] == n.regionOf[s.id] {
				n.register(p, now)
			} else {
				keep = append(keep, p)
			}
		}
		s.fresh = keep
		dirty := s.dirty[:0]
		for _, p := range s.dirty {
			if n.regionOf[p.to] == n.regionOf[s.id] {
				p.publish()
			} else {
				dirty = append(dirty, p)
			}
		}
		s.dirty = dirty
		out := s.out[:0]
		for _, m := range s.out {
			if n.regionOf[m.To] == n.regionOf[s.id] {
				n.sites[m.To].book(m)
			} else {
				out = append(out, m)
			}
		}
		s.out = out
	}
}

// draw groups sites into regions: those joined by a fibre shorter than below.
// It reports the region of each site and the least delay between regions and
// within each.
func draw(p *nodes.Plant, below des.Time) (of []int32, count int, between des.Time, within []des.Time) {
	root := make([]int, len(p.Sites))
	for i := range root {
		root[i] = i
	}
	find := func(i int) int {
		for root[i] != i {
			i = root[i]
		}
		return i
	}
	for _, f := range p.Fibres {
		if f.Delay < below {
			a, b := find(int(f.Ends[0])), find(int(f.Ends[1]))
			root[max(a, b)] = min(a, b)
		}
	}
	of = make([]int32, len(p.Sites))
	for i := range root {
		if find(i) == i {
			of[i] = int32(count)
			count++
		}
	}
	for i := range root {
		of[i] = of[find(i)]
	}
	between = des.Never
	within = make([]des.Time, count)
	for i := range within {
		within[i] = des.Never
	}
	for _, f := range p.Fibres {
		if a, b := of[f.Ends[0]], of[f.Ends[1]]; a == b {
			within[a] = min(within[a], f.Delay)
		} else {
			between = min(between, f.Delay)
		}
	}
	return of, count, between, within
}
