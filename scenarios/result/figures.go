package result

import (
	"bytes"
	"encoding/json"
	"fmt"
)

// Ids of the figures of an [Outcome], as objectives name them.
const (
	FigOffered    = "offered"
	FigDelivered  = "delivered"
	FigDuplicates = "duplicates"
	FigInside     = "inside"
	FigLostPrefix = "lost-" // followed by the cause
	FigLoss       = "loss"
	FigThroughput = "throughput"
	FigDelayMin   = "delay-min"
	FigDelayMean  = "delay-mean"
	FigDelayP50   = "delay-p50"
	FigDelayP95   = "delay-p95"
	FigDelayP99   = "delay-p99"
	FigDelayP999  = "delay-p99.9"
	FigDelayMax   = "delay-max"
	FigPDVP50     = "pdv-p50"
	FigPDVP95     = "pdv-p95"
	FigPDVP99     = "pdv-p99"
	FigPDVP999    = "pdv-p99.9"
	FigIPDVP99    = "ipdv-p99"
	FigIPDVP999   = "ipdv-p99.9"
	FigJitter     = "jitter"
	FigReordered  = "reordered"
	FigOut        = "out"
	FigRecovery   = "recovery"

	// Of closed-loop transports.
	FigTransfers    = "transfers"
	FigTransferMean = "transfer-mean"
	FigTransferP50  = "transfer-p50"
	FigTransferP95  = "transfer-p95"
	FigTransferP99  = "transfer-p99"
	FigGoodput      = "goodput"
	FigResent       = "resent"
	FigTimeouts     = "time-outs"
)

// Units of figures.
const (
	UnitSeconds = "s"
	UnitRatio   = "ratio" // a share of one
	UnitBps     = "bit/s"
	UnitPackets = "packets"
	UnitBytes   = "B"
	UnitSlots   = "slots"
	UnitSlotKm  = "slot-km"
	UnitKm      = "km"
	UnitPorts   = "ports"
	UnitCount   = "count"
)

// A Value is one figure with its unit.
type Value struct {
	Figure string
	Unit   string
	Value  float64
}

// Figures lists every figure of o that can be said, in a fixed order. A study
// folds runs by it, and a long table is written from it.
func (o Outcome) Figures() []Value {
	vs := []Value{
		{FigOffered, UnitPackets, float64(o.OfferedPackets)},
		{FigDelivered, UnitPackets, float64(o.DeliveredPackets)},
		{FigDuplicates, UnitPackets, float64(o.DuplicatePackets)},
		{FigInside, UnitPackets, float64(o.InsidePackets)},
	}
	vs = appendLosses(vs, o.LostPackets)
	vs = appendValue(vs, FigLoss, UnitRatio, o.LossRatio)
	vs = appendValue(vs, FigThroughput, UnitBps, o.ThroughputBps)
	vs = appendDistribution(vs, "delay", o.DelayS)
	vs = appendDistribution(vs, "pdv", o.PDVS)
	vs = appendDistribution(vs, "ipdv", o.IPDVS)
	vs = appendValue(vs, FigJitter, UnitSeconds, o.JitterS)
	vs = appendValue(vs, FigReordered, UnitRatio, o.ReorderedRatio)
	vs = appendValue(vs, FigOut, UnitSeconds, o.OutageS)
	vs = appendValue(vs, FigRecovery, UnitSeconds, o.RecoveryS)
	if t := o.Transfers; t != nil {
		vs = append(vs, Value{FigTransfers, UnitCount, float64(t.Complete)})
		vs = appendDistribution(vs, "transfer", t.TimeS)
		vs = appendValue(vs, FigGoodput, UnitBps, t.GoodputBps)
		vs = append(vs, Value{FigResent, UnitPackets, float64(t.ResentCount)}, Value{FigTimeouts, UnitCount, float64(t.Timeouts)})
	}
	return vs
}

// Figure reports the figure with the given id; ok is false when it cannot be
// said or no figure has that id.
func (o Outcome) Figure(id string) (v Value, ok bool) {
	for _, v := range o.Figures() {
		if v.Figure == id {
			return v, true
		}
	}
	return Value{}, false
}

func appendLosses(vs []Value, ls Losses) []Value {
	for _, l := range ls {
		vs = append(vs, Value{FigLostPrefix + l.Cause, UnitPackets, float64(l.Packets)})
	}
	return vs
}

func appendValue(vs []Value, figure, unit string, v *float64) []Value {
	if v == nil {
		return vs
	}
	return append(vs, Value{figure, unit, *v})
}

func appendDistribution(vs []Value, name string, d Distribution) []Value {
	for _, e := range []struct {
		id string
		v  *float64
	}{
		{"-min", d.Min}, {"-mean", d.Mean}, {"-p50", d.P50}, {"-p95", d.P95},
		{"-p99", d.P99}, {"-p99.9", d.P999}, {"-max", d.Max},
	} {
		vs = appendValue(vs, name+e.id, UnitSeconds, e.v)
	}
	return vs
}

// A Loss counts the packets lost for one cause.
type Loss struct {
	Cause   string // "queue", "cut", "flushed", "no-route", "ttl", "torn-down", ...
	Packets int64
}

// Losses is a list of causes, each once, in a fixed order of the writer's. In
// a file it is an object from cause to packets, in that order.
type Losses []Loss

// Total sums the packets of all causes.
func (ls Losses) Total() int64 {
	var n int64
	for _, l := range ls {
		n += l.Packets
	}
	return n
}

// Of reports the packets lost for cause, 0 when it is not listed.
func (ls Losses) Of(cause string) int64 {
	for _, l := range ls {
		if l.Cause == cause {
			return l.Packets
		}
	}
	return 0
}

// Add adds n packets to cause, which is appended when it is not listed yet.
func (ls *Losses) Add(cause string, n int64) {
	for i := range *ls {
		if (*ls)[i].Cause == cause {
			(*ls)[i].Packets += n
			return
		}
	}
	*ls = append(*ls, Loss{cause, n})
}

// MarshalJSON implements json.Marshaler. It refuses a cause that is listed
// twice.
func (ls Losses) MarshalJSON() ([]byte, error) {
	b := []byte{'{'}
	for i, l := range ls {
		for _, o := range ls[:i] {
			if o.Cause == l.Cause {
				return nil, fmt.Errorf("result: loss cause %q is listed twice", l.Cause)
			}
		}
		if i > 0 {
			b = append(b, ',')
		}
		key, err := json.Marshal(l.Cause)
		if err != nil {
			return nil, err
		}
		b = append(b, key...)
		b = fmt.Appendf(b, ":%d", l.Packets)
	}
	return append(b, '}'), nil
}

// UnmarshalJSON implements json.Unmarshaler and keeps the order of the file.
func (ls *Losses) UnmarshalJSON(data []byte) error {
	*ls = nil
	d := json.NewDecoder(bytes.NewReader(data))
	if t, err := d.Token(); err != nil || t != json.Delim('{') {
		return fmt.Errorf("result: losses are an object from cause to packets, not %.20s", data)
	}
	for d.More() {
		t, err := d.Token()
		if err != nil {
			return err
		}
		var n int64
		if err := d.Decode(&n); err != nil {
			return err
		}
		*ls = append(*ls, Loss{t.(string), n})
	}
	return nil
}
