package workloads

import (
	"math"
	"testing"

	"ferrule/des"
	"ferrule/des/random"
)

func requestsOf(t *testing.T, c RequestsConfig) *Requests {
	t.Helper()
	c.Name = "r"
	r, err := NewRequests(c)
	if err != nil {
		t.Fatal(err)
	}
	return r
}

func TestRequestsFollowTheirLaws(t *testing.T) {
	r := requestsOf(t, RequestsConfig{Rate: 0.5, Hold: random.Spec{Kind: random.Exponential, Mean: 100}, Start: 7 * des.Second})
	var gaps, holds []float64
	last := 7 * des.Second
	for i := range uint64(20_000) {
		next := r.Next()
		at, hold, index := r.Take()
		if at != next || index != i || at < last || hold < 1 {
			t.Fatalf("request %d at %v (said to be %v) after %v, index %d, for %v", i, at, next, last, index, hold)
		}
		gaps = append(gaps, (at-last).Seconds()*0.5)
		holds = append(holds, hold.Seconds()/100)
		last = at
	}
	for _, x := range [][]float64{gaps, holds} {
		if d, limit := ks(x, func(x float64) float64 { return -math.Expm1(-x) }); d > limit {
			t.Errorf("distance %.2f from the exponential law, limit %.2f", d, limit)
		}
	}
}

func TestRequestsConstantStopAndClone(t *testing.T) {
	r := requestsOf(t, RequestsConfig{Rate: 3, Gaps: Constant, Stop: 10 * des.Second, Hold: random.Spec{Mean: 2}})
	first := r.Next()
	if first >= des.Second/3 {
		t.Errorf("first request at %v", first)
	}
	n := 0
	for ; r.Next() != des.Never; n++ {
		c := r.Clone()
		want := first + des.Time(n)*des.Second/3 // the gap is kept to 2^-33 ps
		c1, c2, c3 := c.Take()
		if at, hold, i := r.Take(); at != c1 || hold != c2 || i != c3 || hold != 2*des.Second || at < want-1 || at > want {
			t.Fatalf("request %d at %v for %v, of the clone %d at %v for %v", i, at, hold, c3, c1, c2)
		}
	}
	if n != 30 {
		t.Errorf("%d requests in 10 s at 3/s", n)
	}
	defer func() {
		if recover() == nil {
			t.Error("Take after the last request does not panic")
		}
	}()
	r.Take()
}

// The holding time of request i is its own, whatever the rate.
func TestRequestsKeepHoldingTimes(t *testing.T) {
	a, b := requestsOf(t, RequestsConfig{Rate: 1}), requestsOf(t, RequestsConfig{Rate: 1.3})
	for range 100 {
		_, h, _ := a.Take()
		if _, g, _ := b.Take(); g != h {
			t.Fatalf("holds %v and %v", h, g)
		}
	}
}

func TestRequestsFaults(t *testing.T) {
	_, err := NewRequests(RequestsConfig{Gaps: 7, Start: -1, Hold: random.Spec{Kind: random.Exponential}})
	if err == nil {
		t.Fatal("no faults")
	}
	const want = "name: missing\nstart: -1ps is before 0\nrate: 0/s is not between 0 and 1e9/s\ngaps: no kind 7\nhold: exponential takes mean, above 0; got nothing"
	if err.Error() != want {
		t.Errorf("faults:\n%v\nwant:\n%s", err, want)
	}
}
