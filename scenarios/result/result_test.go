package result_test

import (
	"bytes"
	"encoding/csv"
	"math"
	"reflect"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ferrule/scenarios/result"
)

// filled sets every field under v to a value of its own, so that a field
// which a file forgets or confuses shows as a difference.
func filled(v reflect.Value, n *int) {
	*n++
	switch v.Kind() {
	case reflect.String:
		v.SetString("text-" + strings.Repeat("x", *n%7) + string(rune('a'+*n%26)))
	case reflect.Bool:
		v.SetBool(true)
	case reflect.Int, reflect.Int64:
		v.SetInt(int64(*n))
	case reflect.Uint64:
		v.SetUint(math.MaxUint64 - uint64(*n)) // beyond the whole numbers of a float64
	case reflect.Float64:
		v.SetFloat(float64(*n) / 7)
	case reflect.Pointer:
		v.Set(reflect.New(v.Type().Elem()))
		filled(v.Elem(), n)
	case reflect.Slice:
		v.Set(reflect.MakeSlice(v.Type(), 2, 2))
		for i := range v.Len() {
			filled(v.Index(i), n)
		}
		if ls, ok := v.Addr().Interface().(*result.Losses); ok {
			(*ls)[0].Cause, (*ls)[1].Cause = "queue", "cut" // causes differ, order is not sorted
		}
	case reflect.Struct:
		for i := range v.NumField() {
			filled(v.Field(i), n)
		}
	default:
		panic("result_test: unexpected kind " + v.Kind().String())
	}
}

func all() []result.Result {
	rs := []result.Result{new(result.Run), new(result.Batch), new(result.Comparison), new(result.Check)}
	for _, r := range rs {
		n := 0
		filled(reflect.ValueOf(r).Elem(), &n)
	}
	return rs
}

func TestRoundTrip(t *testing.T) {
	for _, want := range all() {
		data, err := result.Encode(want)
		if err != nil {
			t.Fatal(err)
		}
		got, err := result.Decode(data)
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff(want, got); d != "" {
			t.Errorf("%T changed on its way through a file (-want +got):\n%s", want, d)
		}
		again, err := result.Encode(got)
		if err != nil || !bytes.Equal(data, again) {
			t.Errorf("%T: second encoding differs from the first (%v)", want, err)
		}
	}
}

func TestKeysOfARun(t *testing.T) {
	data, err := result.Encode(&result.Run{
		Classes: []result.Class{{Periods: []result.Outcome{{
			LostPackets: result.Losses{{Cause: "queue", Packets: 3}, {Cause: "cut"}},
			LossRatio:   new(0.25),
			DelayS:      result.Distribution{P99: new(0.0125)},
		}}}},
	})
	if err != nil {
		t.Fatal(err)
	}
	text := string(data)
	for _, want := range []string{
		`"format": 1,`, `"kind": "run",`, `"warm_up_s": 0,`, `"aggregates": [],`, `"cautions": []`,
		`"offered_packets": 0,`, `"loss_ratio": 0.25,`, "\"delay_s\": {\n            \"p99\": 0.0125\n",
		"\"lost_packets\": {\n            \"queue\": 3,\n            \"cut\": 0\n",
	} {
		if !strings.Contains(text, want) {
			t.Errorf("no %s in\n%s", want, text)
		}
	}
	for _, absent := range []string{"null", "pdv_s", "outage_s", "p999", "partial", "tightest"} {
		if strings.Contains(text, absent) {
			t.Errorf("%q stands in\n%s", absent, text)
		}
	}
}

func TestEncodeRefuses(t *testing.T) {
	outcome := func(o result.Outcome) *result.Run {
		return &result.Run{Classes: []result.Class{{}, {Periods: []result.Outcome{o}}}}
	}
	for _, c := range []struct {
		name string
		r    result.Result
		want string
	}{
		{"NaN behind a pointer", outcome(result.Outcome{DelayS: result.Distribution{P999: new(math.NaN())}}),
			"result: classes[1].periods[0].delay_s.p999 is not a finite number"},
		{"infinity", &result.Check{Estimate: result.Estimate{PacketHops: math.Inf(1)}},
			"result: estimate.packet_hops is not a finite number"},
		{"NaN in the head", &result.Batch{Head: result.Head{LengthS: math.NaN()}},
			"result: length_s is not a finite number"},
		{"a cause twice", outcome(result.Outcome{LostPackets: result.Losses{{"cut", 1}, {"cut", 2}}}),
			`loss cause "cut" is listed twice`},
	} {
		if _, err := result.Encode(c.r); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want %s", c.name, err, c.want)
		}
	}
}

func TestNegativeZeroIsWrittenAsZero(t *testing.T) {
	data, err := result.Encode(&result.Run{Price: result.Price{SlotKm: math.Copysign(0, -1)}})
	if err != nil || !bytes.Contains(data, []byte(`"slot_km": 0,`)) {
		t.Errorf("error %v, file\n%s", err, data)
	}
}

func TestDecodeRefuses(t *testing.T) {
	for _, c := range []struct{ file, want string }{
		{`{"format": 2, "kind": "run"}`, "format 2, want 1"},
		{`{"kind": "run"}`, "format 0, want 1"},
		{`{"format": 1, "kind": "rum"}`, `kind "rum"`},
		{`{"format": 1, "kind": "run", "audit": {"lost_packets": [1]}}`, "losses are an object"},
		{`not json`, "invalid character"},
	} {
		if _, err := result.Decode([]byte(c.file)); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: error %v, want %s", c.file, err, c.want)
		}
	}
	if _, err := result.DecodeRun([]byte(`{"format": 1, "kind": "check"}`)); err == nil {
		t.Error("DecodeRun took a check")
	}
}

func TestDecodeSkipsUnknownKeys(t *testing.T) {
	r, err := result.DecodeRun([]byte(`{"format": 1, "kind": "run", "plan": "p", "later": {"x": 1}}`))
	if err != nil || r.Plan != "p" {
		t.Errorf("got %v, %v", r, err)
	}
}

func TestLosses(t *testing.T) {
	var ls result.Losses
	ls.Add("queue", 2)
	ls.Add("cut", 0)
	ls.Add("queue", 5)
	if d := cmp.Diff(result.Losses{{"queue", 7}, {"cut", 0}}, ls); d != "" {
		t.Error(d)
	}
	if ls.Total() != 7 || ls.Of("queue") != 7 || ls.Of("ttl") != 0 {
		t.Errorf("total %d, queue %d, ttl %d", ls.Total(), ls.Of("queue"), ls.Of("ttl"))
	}
}

func TestFiguresLeaveOutWhatCannotBeSaid(t *testing.T) {
	o := result.Outcome{OfferedPackets: 4, DelayS: result.Distribution{P99: new(0.5)},
		LostPackets: result.Losses{{"cut", 1}}}
	want := []result.Value{
		{"offered", "packets", 4}, {"delivered", "packets", 0}, {"duplicates", "packets", 0},
		{"inside", "packets", 0}, {"lost-cut", "packets", 1}, {"delay-p99", "s", 0.5},
	}
	if d := cmp.Diff(want, o.Figures()); d != "" {
		t.Error(d)
	}
	if v, ok := o.Figure(result.FigDelayP99); !ok || v.Value != 0.5 {
		t.Errorf("delay-p99: %v, %v", v, ok)
	}
	if _, ok := o.Figure(result.FigDelayP999); ok {
		t.Error("delay-p99.9 is said without a value")
	}
}

// The figure ids that tables and objectives use are those Figures gives.
func TestFigureIDs(t *testing.T) {
	var o result.Outcome
	n := 0
	filled(reflect.ValueOf(&o).Elem(), &n)
	for _, id := range []string{
		result.FigOffered, result.FigDelivered, result.FigDuplicates, result.FigInside, result.FigLoss,
		result.FigThroughput, result.FigDelayMin, result.FigDelayMean, result.FigDelayP50, result.FigDelayP95,
		result.FigDelayP99, result.FigDelayP999, result.FigDelayMax, result.FigPDVP50, result.FigPDVP95,
		result.FigPDVP99, result.FigPDVP999, result.FigIPDVP99, result.FigIPDVP999, result.FigJitter,
		result.FigReordered, result.FigOut, result.FigRecovery,
	} {
		if _, ok := o.Figure(id); !ok {
			t.Errorf("no figure %q", id)
		}
	}
}

func TestCSVIsOneLongTable(t *testing.T) {
	for _, r := range all() {
		var b bytes.Buffer
		if err := result.WriteCSV(&b, r); err != nil {
			t.Fatal(err)
		}
		rows, err := csv.NewReader(&b).ReadAll() // refuses rows of another width
		if err != nil {
			t.Fatal(err)
		}
		if d := cmp.Diff([]string{"scope", "name", "period", "figure", "unit", "value"}, rows[0]); d != "" {
			t.Error(d)
		}
		if len(rows) < 10 {
			t.Errorf("%T: %d rows", r, len(rows))
		}
	}
}

func TestCSVRows(t *testing.T) {
	var b bytes.Buffer
	err := result.WriteCSV(&b, &result.Comparison{Plans: []result.Compared{{
		Plan: "vx",
		Figures: []result.Difference{{Class: "voice", Period: "hit", Figure: "delay-p99", Unit: "s",
			Base: new(0.02), Plan: new(0.015), Difference: new(-0.005), Interval: &result.Interval{Half: new(1e-4)}}},
	}}})
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{
		"vx/class,voice,hit,delay-p99 base,s,0.02\n", "vx/class,voice,hit,delay-p99 plan,s,0.015\n",
		"vx/class,voice,hit,delay-p99 difference,s,-0.005\n", "vx/class,voice,hit,delay-p99 half-width,s,0.0001\n",
	} {
		if !strings.Contains(b.String(), want) {
			t.Errorf("no row %sin\n%s", want, b.String())
		}
	}
	if strings.Contains(b.String(), "limit") {
		t.Error("a limit is written that was not given")
	}
}

// A long list of numbers stands on one line, whatever strings look like one,
// and the file reads back the same.
func TestLongListsOnOneLine(t *testing.T) {
	r := &result.Run{Plan: "[\n1,\n2,\n3", Series: []result.Series{{Class: "a, [", OfferedPackets: make([]int64, 20), LostPackets: []int64{1, 2},
		MeanDelayS: append(make([]*float64, 19), new(1.5e-7))}}}
	b, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	for _, want := range []string{
		"\"offered_packets\": [0,0,0,0,0,0,0,0,0,0,0,0,0,0,0,0,0,0,0,0],\n", ",null,1.5e-7],\n", "\"lost_packets\": [\n        1,\n        2\n      ]",
	} {
		if !strings.Contains(string(b), want) {
			t.Errorf("no %q in\n%s", want, b)
		}
	}
	back, err := result.DecodeRun(b)
	if err != nil {
		t.Fatal(err)
	}
	again, err := result.Encode(back)
	if err != nil || string(again) != string(b) || back.Plan != r.Plan {
		t.Errorf("reads back otherwise (%v)", err)
	}
}
