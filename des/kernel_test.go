package des_test

import (
	"fmt"
	"math/rand/v2"
	"slices"
	"strings"
	"sync"
	"sync/atomic"
	"testing"

	"ferrule/des"
)

// ball is what the regions of the toy model throw to each other.
type ball struct {
	at   des.Time
	from int
	no   uint64
	left int // throws left
}

func (b *ball) When() des.Time { return b.at }
func (b *ball) Before(o *ball) bool {
	if b.from != o.from {
		return b.from < o.from
	}
	return b.no < o.no
}

// yard is a region: it catches balls in order, folds each into its state, and
// throws them on to a place and after a delay that its state decides.
type yard struct {
	id     int
	yards  int
	least  des.Time
	agenda des.Agenda[ball, *ball]
	out    []thrown
	no     uint64
	state  uint64
	caught []des.Time
}

type thrown struct {
	to int
	ball
}

func (y *yard) Next() des.Time { return y.agenda.Next() }

func (y *yard) Run(end des.Time) {
	for y.agenda.Next() < end {
		b := y.agenda.Take()
		y.caught = append(y.caught, b.at)
		y.state = (y.state^uint64(b.at)^b.no<<32^uint64(b.from))*0x9e3779b97f4a7c15 + 1
		if b.left == 0 {
			continue
		}
		y.no++
		to := int(y.state>>33) % y.yards
		next := ball{b.at + des.Time(y.state>>50), y.id, y.no, b.left - 1}
		if to == y.id { // within a region there is no least delay
			next.at++
			y.agenda.Put(next)
			continue
		}
		next.at += y.least
		y.out = append(y.out, thrown{to, next})
	}
}

// playground is the model: at each act it notes what every region has done and
// throws in a new ball for the very instant.
type playground struct {
	yards []*yard
	least des.Time
	acts  []des.Time
	notes []string
	edge  des.Time
	max   des.Time
}

func newPlayground(yards int, seed uint64) *playground {
	p := &playground{least: 5 * des.Microsecond, max: des.Never}
	r := rand.New(rand.NewPCG(seed, 0))
	for i := range yards {
		y := &yard{id: i, yards: yards, least: p.least}
		for k := range 3 {
			y.agenda.Put(ball{des.Time(r.IntN(40_000_000)), -1, uint64(i*3 + k), 300})
		}
		p.yards = append(p.yards, y)
	}
	for range 20 {
		p.acts = append(p.acts, des.Time(r.Int64N(int64(2*des.Millisecond))))
	}
	slices.Sort(p.acts)
	return p
}

func (p *playground) Regions() []des.Region {
	out := make([]des.Region, len(p.yards))
	for i, y := range p.yards {
		out[i] = y
	}
	return out
}

func (p *playground) Lookahead() des.Time { return p.least }
func (p *playground) MaxWindow() des.Time { return p.max }

func (p *playground) Edge(now des.Time, touched func(int)) {
	p.edge = now
	for _, y := range p.yards {
		for _, t := range y.out {
			if t.at < now {
				panic("thrown into the past")
			}
			p.yards[t.to].agenda.Put(t.ball)
			touched(t.to)
		}
		y.out = y.out[:0]
	}
}

func (p *playground) NextAct() des.Time {
	if len(p.acts) == 0 {
		return des.Never
	}
	return p.acts[0]
}

func (p *playground) Act(now des.Time) {
	for p.NextAct() == now {
		p.acts = p.acts[1:]
	}
	var b strings.Builder
	fmt.Fprintf(&b, "%d:", now)
	for _, y := range p.yards {
		fmt.Fprintf(&b, " %x/%d", y.state, len(y.caught))
	}
	p.notes = append(p.notes, b.String())
	p.yards[int(now)%len(p.yards)].agenda.Put(ball{now, -2, uint64(len(p.notes)), 50})
}

func (p *playground) dump() string {
	var b strings.Builder
	for _, y := range p.yards {
		fmt.Fprintf(&b, "%d %x %d %v\n", y.id, y.state, y.no, y.caught)
	}
	return b.String() + strings.Join(p.notes, "\n")
}

// crew is an executor of goroutines: one to a call, for tests.
type crew struct{ workers int }

func (c crew) Each(n int, do func(i int)) {
	var next atomic.Int64
	var wg sync.WaitGroup
	for range c.workers {
		wg.Go(func() {
			for i := int(next.Add(1)) - 1; i < n; i = int(next.Add(1)) - 1 {
				do(i)
			}
		})
	}
	wg.Wait()
}

// How windows are cut and who runs the regions never shows.
func TestKernelWindowsDoNotShow(t *testing.T) {
	const horizon = 4 * des.Millisecond
	run := func(exec des.Executor, set func(*des.Kernel, *playground)) (string, uint64) {
		p := newPlayground(9, 7)
		k := des.NewKernel(p, exec)
		if set != nil {
			set(k, p)
		}
		k.Advance(horizon, nil)
		if k.Now() != horizon || p.edge != horizon {
			t.Errorf("advanced to %v, last edge at %v; want %v", k.Now(), p.edge, horizon)
		}
		return p.dump(), k.Windows()
	}
	want, natural := run(nil, nil)
	r := rand.New(rand.NewPCG(3, 3))
	for _, c := range []struct {
		name string
		exec des.Executor
		set  func(*des.Kernel, *playground)
		more bool // windows must be more than by nature, or the case tests nothing
	}{
		{"a seventh", nil, func(k *des.Kernel, _ *playground) { k.Window = 5 * des.Microsecond / 7 }, true},
		{"longer than allowed", nil, func(k *des.Kernel, _ *playground) { k.Window = des.Second }, false},
		{"random", nil, func(k *des.Kernel, _ *playground) {
			k.WindowFunc = func() des.Time { return des.Time(r.Int64N(int64(6 * des.Microsecond))) }
		}, true},
		{"bounded by the model", nil, func(_ *des.Kernel, p *playground) { p.max = des.Microsecond }, true},
		{"two workers", crew{2}, nil, false},
		{"five workers, random", crew{5}, func(k *des.Kernel, _ *playground) {
			k.WindowFunc = func() des.Time { return des.Time(r.Int64N(int64(6 * des.Microsecond))) }
		}, true},
	} {
		got, windows := run(c.exec, c.set)
		if got != want {
			t.Errorf("%s: state differs from that of natural windows", c.name)
		}
		if c.more != (windows > natural) {
			t.Errorf("%s: %d windows, %d by nature", c.name, windows, natural)
		}
	}
}

// Advancing in many steps does what advancing in one does.
func TestKernelAdvanceInSteps(t *testing.T) {
	p, q := newPlayground(5, 1), newPlayground(5, 1)
	k, l := des.NewKernel(p, nil), des.NewKernel(q, nil)
	k.Advance(3*des.Millisecond, nil)
	r := rand.New(rand.NewPCG(2, 2))
	for l.Now() < 3*des.Millisecond {
		l.Advance(min(l.Now()+des.Time(1+r.Int64N(int64(40*des.Microsecond))), 3*des.Millisecond), nil)
	}
	if p.dump() != q.dump() {
		t.Error("steps show in the state")
	}
	stops := 0
	m := des.NewKernel(newPlayground(5, 1), nil)
	m.Advance(3*des.Millisecond, func() bool { stops++; return true })
	if stops != 1 || m.Windows() != 1 || m.Now() >= 3*des.Millisecond {
		t.Errorf("asked to stop after a window: asked %d times, ran %d windows, to %v", stops, m.Windows(), m.Now())
	}
}

// An act at the instant of work sees nothing of that instant, and all before.
func TestKernelActsComeFirst(t *testing.T) {
	p := newPlayground(2, 1)
	for _, y := range p.yards {
		y.agenda = des.Agenda[ball, *ball]{}
	}
	p.yards[0].agenda.Put(ball{99, -1, 0, 0})
	p.yards[0].agenda.Put(ball{100, -1, 1, 0})
	p.yards[1].agenda.Put(ball{100, -1, 2, 0})
	p.acts = []des.Time{100, 100, 300}
	des.NewKernel(p, nil).Advance(300, nil)
	if len(p.notes) != 1 {
		t.Fatalf("%d acts before 300 ps, want the one instant 100 ps: %v", len(p.notes), p.notes)
	}
	if f := strings.Fields(p.notes[0]); !strings.HasSuffix(f[1], "/1") || !strings.HasSuffix(f[2], "/0") {
		t.Errorf("at the act the regions had caught %v, want 1 and 0", f[1:])
	}
	if a, b := len(p.yards[0].caught), len(p.yards[1].caught); a != 3 || b != 1 { // with the ball of the act
		t.Errorf("afterwards they had caught %d and %d, want 3 and 1", a, b)
	}
	if p.NextAct() != 300 {
		t.Error("an act at the end of Advance was carried out; it is before nothing")
	}
}

// An hour in which something happens every ten minutes takes a handful of
// windows, not one for each 5 us.
func TestKernelSkipsQuiet(t *testing.T) {
	p := newPlayground(4, 1)
	p.acts = nil
	for i, y := range p.yards {
		y.agenda = des.Agenda[ball, *ball]{}
		y.agenda.Put(ball{des.Time(i) * 10 * des.Minute, -1, uint64(i), 2})
	}
	k := des.NewKernel(p, nil)
	k.Advance(des.Hour, nil)
	if w := k.Windows(); w < 4 || w > 12 { // three catches of four balls
		t.Errorf("%d windows for 12 catches in an hour", w)
	}
	if k.Now() != des.Hour {
		t.Errorf("now %v, want an hour", k.Now())
	}
}

// Weeks of quiet between events of many regions: beyond the calendar's range.
func TestKernelLongQuiet(t *testing.T) {
	p := newPlayground(700, 1)
	p.acts = nil
	var want []des.Time
	for i, y := range p.yards {
		y.agenda = des.Agenda[ball, *ball]{}
		if i%100 == 0 { // later regions first: 60 days, 50, ...
			at := des.Time(60-i/10) * 24 * des.Hour
			y.agenda.Put(ball{at, -1, 0, 0})
			want = append(want, at)
		}
	}
	k := des.NewKernel(p, nil)
	k.Advance(100*24*des.Hour, func() bool { return false })
	for i, at := range want {
		if got := p.yards[i*100].caught; len(got) != 1 || got[0] != at {
			t.Errorf("region %d caught at %v, want at %v", i*100, got, at)
		}
	}
	if w := k.Windows(); w != uint64(len(want)) {
		t.Errorf("%d windows, want %d: one for each in order of time", w, len(want))
	}
}

func TestKernelNeedsLookahead(t *testing.T) {
	defer func() {
		if recover() == nil {
			t.Error("a lookahead of 0 was accepted")
		}
	}()
	p := newPlayground(2, 1)
	p.least = 0
	des.NewKernel(p, nil)
}

func TestTimeString(t *testing.T) {
	for _, c := range []struct {
		t    des.Time
		want string
	}{
		{0, "0ps"}, {1, "1ps"}, {-1500, "-1.5ns"}, {4_897_388, "4.897388us"}, {des.Millisecond, "1ms"},
		{des.Hour, "3600s"}, {des.Second + 1, "1.000000000001s"}, {des.Never, "never"}, {-1 << 63, "-9223372.036854775808s"},
	} {
		if got := c.t.String(); got != c.want {
			t.Errorf("%d ps prints as %s, want %s", int64(c.t), got, c.want)
		}
	}
	if got := des.Never.Plus(1); got != des.Never {
		t.Errorf("Never plus 1 ps is %v", got)
	}
	if got := (des.Never - 5).Plus(10); got != des.Never {
		t.Errorf("an overflowing sum is %v, want never", got)
	}
}

// FuzzSum compares 128-bit sums with sums of small parts.
func FuzzSum(f *testing.F) {
	f.Add(uint64(1)<<63, uint64(1)<<63, uint64(3))
	f.Add(^uint64(0), ^uint64(0), ^uint64(0))
	f.Fuzz(func(t *testing.T, a, b, c uint64) {
		var s, u des.Sum
		s.AddProduct(a, b)
		s.Add(c)
		// (a1*2^32 + a0)*b the long way
		u.AddProduct(a&(1<<32-1), b)
		var high des.Sum
		high.AddProduct(a>>32, b)
		u.AddSum(des.Sum{Hi: high.Hi<<32 | high.Lo>>32, Lo: high.Lo << 32})
		u.Add(c)
		if s != u {
			t.Fatalf("%d*%d+%d: %v, in parts %v", a, b, c, s, u)
		}
		s.Sub(des.Sum{Lo: c})
		var p des.Sum
		p.AddProduct(a, b)
		if s != p {
			t.Fatalf("after subtracting %d again: %v, want %v", c, s, p)
		}
	})
}
