package library_test

import "testing"

// The drill shows what its comment says. The break is 300 km from either end,
// 1.469 ms of light, and a defect is declared after 3 ms: 2500 packets a
// second lose 2500 x (2 x 1.469 + 3) ms = 14.8 of them to the cut itself, and
// where the port is held back for 50 ms, 125 more. A 1+1 circuit loses what is
// sent in detection and switching less the difference of its ways: 3 + 10 - 3.33
// ms, 24.2 packets.
func TestCutDrill(t *testing.T) {
	sc := withCut(t, load(t, "cut-drill"), "pier-lock@4s..8s")
	r := run(t, sc, "drill", 1)
	type fate struct{ cut, other, out, after float64 }
	got := map[string]fate{}
	for _, c := range r.Classes {
		var f fate
		for _, p := range c.Periods {
			f.cut += float64(p.LostPackets.Of("cut"))
			f.other += float64(p.LostPackets.Total() - p.LostPackets.Of("cut"))
			if p.OutageS != nil {
				f.out = max(f.out, *p.OutageS)
			}
			if p.Period == "after" {
				f.after = float64(p.LostPackets.Total())
			}
		}
		got[c.Name] = f
	}
	for _, name := range []string{"routed", "return", "restore", "patient", "bare"} {
		if f := got[name]; f.cut < 14 || f.cut > 15 {
			t.Errorf("%s loses %v packets to the cut, want 14 or 15", name, f.cut)
		}
	}
	if f := got["held"]; f.cut < 139 || f.cut > 140 || f.other > 0 || f.out < 0.0555 || f.out > 0.0565 {
		t.Errorf("held: %+v; want 139 or 140 packets lost to the cut, none otherwise, silent for 56 ms", f)
	}
	if f := got["twin"]; f.cut < 23 || f.cut > 25 || f.out < 0.0095 || f.out > 0.0105 {
		t.Errorf("twin: %+v; want 24 packets lost to the cut, silent for 9.67 ms and a packet", f)
	}
	if f := got["patient"]; f.other > 0 || f.out > 0.0065 {
		t.Errorf("patient: %+v; want nothing lost but to the cut", f)
	}
	if f := got["bare"]; f.out < 4 || f.out > 4.2 || f.after == 0 {
		t.Errorf("bare: %+v; want silence until the repair", f)
	}
	for _, name := range []string{"routed", "return", "restore"} {
		if f := got[name]; f.out < 0.006 || f.out > 0.1 || f.after > 0 {
			t.Errorf("%s: %+v; want silence for some ten milliseconds", name, f)
		}
	}
	for _, c := range r.Circuits {
		switch c.Name {
		case "x-restore", "x-patient", "x-held":
			if c.State != "up" || len(c.Fibres) != 1 || c.DownS == 0 || c.DownS > 0.5 {
				t.Errorf("%s: %s over %v, down for %v s; want it back on the short way", c.Name, c.State, c.Fibres, c.DownS)
			}
		case "x-return", "x-bare":
			if c.State != "up" || len(c.Fibres) != 1 || c.DownS < 4 {
				t.Errorf("%s: %s over %v, down for %v s", c.Name, c.State, c.Fibres, c.DownS)
			}
		}
	}
	knew := map[string]bool{}
	for _, e := range r.Events {
		knew[e.What] = true
	}
	for _, what := range []string{"light lost", "port down", "fibre down", "up", "light back", "up again"} {
		if !knew[what] {
			t.Errorf("no event says %q", what)
		}
	}
}

// Without a cut nothing is lost, under either plan.
func TestDrillAtRest(t *testing.T) {
	sc := load(t, "cut-drill", "run.length=2s")
	for _, plan := range []string{"as-is", "drill"} {
		if r := run(t, sc, plan, 1); r.Audit.Lost() > 0 {
			t.Errorf("%s: %v lost", plan, r.Audit.LostPackets)
		}
	}
}
