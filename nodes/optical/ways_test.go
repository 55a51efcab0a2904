package optical_test

import (
	"math/rand/v2"
	"testing"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/nodes/optical"
)

// scattered is a plant of so many sites joined at random, some twice, with
// delays of few different lengths, so that ways of equal cost abound.
func scattered(r *rand.Rand, sites, fibres int) *nodes.Plant {
	p := &nodes.Plant{Sites: make([]nodes.Site, sites)}
	for range fibres {
		a := r.IntN(sites)
		b := (a + 1 + r.IntN(sites-1)) % sites
		p.Fibres = append(p.Fibres, nodes.Fibre{Ends: [2]nodes.SiteID{nodes.SiteID(a), nodes.SiteID(b)}, Delay: des.Time(1+r.IntN(4)) * 100})
	}
	return p
}

// way is a way as the reference finds it.
type way struct {
	delay  des.Time
	hops   int
	fibres []nodes.FibreID
}

// before orders ways: delay, fewer fibres, lower fibre at each site in turn.
func (w *way) before(o *way) bool {
	if w.delay != o.delay {
		return w.delay < o.delay
	}
	if w.hops != o.hops {
		return w.hops < o.hops
	}
	for i := range w.fibres {
		if w.fibres[i] != o.fibres[i] {
			return w.fibres[i] < o.fibres[i]
		}
	}
	return false
}

// walk tries every way without a loop: the slow reference.
func walk(p *nodes.Plant, dark []bool, at, to nodes.SiteID, seen uint, so way, best **way) {
	if at == to {
		if *best == nil || so.before(*best) {
			so.fibres = append([]nodes.FibreID(nil), so.fibres...)
			*best = &so
		}
		return
	}
	for i := range p.Fibres {
		f := &p.Fibres[i]
		if dark[i] || f.Ends[0] != at && f.Ends[1] != at || seen>>f.Other(at)&1 == 1 {
			continue
		}
		next := f.Other(at)
		walk(p, dark, next, to, seen|1<<next, way{so.delay + f.Delay, so.hops + 1, append(so.fibres, nodes.FibreID(i))}, best)
	}
}

// Ways are those that trying all of them finds, with any fibres dark, and a
// message passes exactly if no place of its way is dark as it comes by.
func TestWaysAgainstTryingAll(t *testing.T) {
	r := rand.New(rand.NewPCG(1, 2))
	const converge = 50
	refused, passed := 0, 0
	for round := range 150 {
		sites := 2 + r.IntN(5)
		p := scattered(r, sites, 1+r.IntN(9))
		w := optical.NewWays(p, converge)
		l := optical.NewLight(len(p.Fibres))
		dark := make([]bool, len(p.Fibres))
		now := des.Time(0)
		known := [][]bool{append([]bool(nil), dark...)} // by epoch
		from := []des.Time{0}
		for range 4 {
			now += des.Time(1 + r.IntN(300))
			f := r.IntN(len(p.Fibres))
			if dark[f] {
				l.Repair(f, now)
			} else {
				l.Cut(f, des.Time(r.IntN(int(p.Fibres[f].Delay)+1)), now, optical.Dirs(1+r.IntN(3)))
			}
			dark[f] = !dark[f]
			w.Changed(now, func(g nodes.FibreID) bool { return dark[g] })
			known = append(known, append([]bool(nil), dark...))
			from = append(from, now+converge)
		}
		for range 40 {
			sent := des.Time(r.IntN(int(now) + 100))
			a := nodes.SiteID(r.IntN(sites))
			b := nodes.SiteID(r.IntN(sites))
			e := len(from) - 1
			for from[e] > sent {
				e--
			}
			if got := w.Epoch(sent); got != int32(e) {
				t.Fatalf("round %d: epoch %d in force at %d, want %d", round, got, sent, e)
			}
			var best *way
			walk(p, known[e], a, b, 1<<a, way{}, &best)
			if best == nil {
				if d := w.Delay(int32(e), a, b); d != des.Never || w.Passes(l, int32(e), a, b, sent) {
					t.Fatalf("round %d: %d to %d has delay %v, but there is no way", round, a, b, d)
				}
				continue
			}
			if d := w.Delay(int32(e), a, b); d != best.delay {
				t.Fatalf("round %d: %d to %d takes %d ps, by trying all %d ps", round, a, b, d, best.delay)
			}
			want, at, site := true, sent, a
			for _, g := range best.fibres {
				f := &p.Fibres[g]
				for _, s := range l.Spans(int(g)) {
					place := s.Place
					if f.From(site) == nodes.Back {
						place = f.Delay - place
					}
					if s.Dirs.Has(f.From(site)) && at+place >= s.From && at+place < s.To {
						want = false
					}
				}
				at += f.Delay
				site = f.Other(site)
			}
			if got := w.Passes(l, int32(e), a, b, sent); got != want {
				t.Fatalf("round %d: message from %d to %d sent at %d over %v passes: %v, want %v", round, a, b, sent, best.fibres, got, want)
			}
			if want {
				passed++
			} else {
				refused++
			}
		}
		if c := w.Clone(); c.Epoch(now+converge) != w.Epoch(now+converge) {
			t.Error("a clone of the ways is in another epoch")
		} else {
			c.Changed(now+1, func(nodes.FibreID) bool { return true })
			if w.Epoch(now+10*converge) == c.Epoch(now+10*converge) {
				t.Error("changing a clone of the ways changed the original")
			}
		}
	}
	if refused < 100 || passed < 1000 {
		t.Errorf("%d messages refused, %d passed: too few to test anything", refused, passed)
	}
}

func TestLight(t *testing.T) {
	l := optical.NewLight(2)
	if got := l.Cut(1, 7, 100, optical.DirBoth); got != 0 {
		t.Errorf("first span is number %d", got)
	}
	if got := l.Cut(1, 3, 150, optical.DirOut); got != 1 {
		t.Errorf("second span is number %d", got)
	}
	c := l.Clone()
	if got := l.Repair(1, 200); len(got) != 2 || got[0] != 0 || got[1] != 1 {
		t.Errorf("repair ended spans %v, want 0 and 1", got)
	}
	if got := l.Repair(1, 300); got != nil {
		t.Errorf("a second repair ended spans %v", got)
	}
	for _, x := range []struct {
		l    *optical.Light
		f    int
		at   des.Time
		dark bool
		back bool // that way alone
	}{
		{l, 0, 150, false, false}, {l, 1, 99, false, false}, {l, 1, 100, true, true}, {l, 1, 199, true, true},
		{l, 1, 200, false, false}, {c, 1, 200, true, true}, {c, 1, 1 << 60, true, true},
	} {
		if got := x.l.Dark(x.f, x.at); got != x.dark {
			t.Errorf("fibre %d dark at %d: %v", x.f, x.at, got)
		}
		if got := x.l.DarkTowards(x.f, x.at, nodes.Back); got != x.back {
			t.Errorf("fibre %d dark back at %d: %v", x.f, x.at, got)
		}
	}
	l.Cut(0, 1, 400, optical.DirOut)
	if !l.DarkTowards(0, 400, nodes.Out) || l.DarkTowards(0, 400, nodes.Back) {
		t.Error("a cut one way is dark one way only")
	}
	if s := l.Spans(1); len(s) != 2 || s[0] != (optical.Span{Place: 7, From: 100, To: 200, Dirs: optical.DirBoth}) || s[1].Place != 3 {
		t.Errorf("history %+v", s)
	}
}
