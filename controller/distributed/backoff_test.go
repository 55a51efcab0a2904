package distributed

import (
	"testing"

	"ferrule/des"
)

// The sequence of RFC 8405, section 6 (value from memory): events at 0, 30, 290,
// 600 and 2000 ms make computations at 50, 490 and 5600 ms, and all is quiet at
// 12000 ms, 10 s after the last event.
func TestBackoffOfTheRFC(t *testing.T) {
	const ms = des.Millisecond
	b := Backoff{Delays: DefaultDelays()}
	var due des.Time = des.Never
	var ran []des.Time
	events := []des.Time{0, 30 * ms, 290 * ms, 600 * ms, 2000 * ms}
	want := []State{ShortWait, ShortWait, ShortWait, LongWait, LongWait}
	for i, e := range events {
		if due <= e {
			b.Ran()
			ran, due = append(ran, due), des.Never
		}
		if at, start := b.Event(e); start {
			due = at
		}
		if s := b.StateAt(e); s != want[i] {
			t.Errorf("after the event at %v: %v, want %v", e, s, want[i])
		}
	}
	b.Ran()
	ran = append(ran, due)
	if len(ran) != 3 || ran[0] != 50*ms || ran[1] != 490*ms || ran[2] != 5600*ms {
		t.Errorf("computed at %v, want 50 ms, 490 ms and 5.6 s", ran)
	}
	if s := b.StateAt(12000*ms - 1); s != LongWait {
		t.Errorf("just before 12 s: %v", s)
	}
	if s := b.StateAt(12000 * ms); s != Quiet {
		t.Errorf("at 12 s: %v", s)
	}
	if at, start := b.Event(13000 * ms); !start || at != 13050*ms {
		t.Errorf("the first event after the quiet is answered at %v, want 50 ms later", at)
	}
}

// Learning ends on time without an event, and quiet comes from there too.
func TestBackoffTimersExpireUnasked(t *testing.T) {
	b := Backoff{Delays: DefaultDelays()}
	b.Event(0)
	b.Ran()
	if s := b.StateAt(500*des.Millisecond - 1); s != ShortWait {
		t.Errorf("before 500 ms: %v", s)
	}
	if s := b.StateAt(500 * des.Millisecond); s != LongWait {
		t.Errorf("at 500 ms: %v", s)
	}
	if at, start := b.Event(700 * des.Millisecond); !start || at != 5700*des.Millisecond {
		t.Errorf("an event at 700 ms is answered at %v, want 5.7 s", at)
	}
	if _, start := b.Event(800 * des.Millisecond); start {
		t.Error("a computation is booked while one is due")
	}
	if s := b.StateAt(10 * 1000 * des.Millisecond); s != LongWait {
		t.Errorf("at 10 s: %v; the last event was at 0.8 s", s)
	}
	if s := b.StateAt(10800 * des.Millisecond); s != Quiet {
		t.Errorf("at 10.8 s: %v", s)
	}
}
