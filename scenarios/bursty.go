package scenarios

import (
	"errors"
	"fmt"
	"strings"

	"ferrule/des"
	"ferrule/nodes"
	"ferrule/workloads"
)

// Defaults of what the bursty models send; the sources say where they are from.
const (
	defaultSpurt   = 1004 * des.Millisecond
	defaultSilence = 1587 * des.Millisecond
	defaultHurst   = 0.8
	defaultPeak    = 10 * nodes.Mbps
	defaultOn      = 100 * des.Millisecond
	defaultOff     = 200 * des.Millisecond
	defaultHigh    = 100 * des.Millisecond
	defaultPace    = 100 * nodes.Mbps
	defaultParse   = 130 * des.Millisecond
)

// talk reads how speakers talk and listen.
func (r *resolver) talk(p *place, raw *rawTraffic, t *Traffic) {
	t.Talkspurts = value(raw.Talkspurts, false)
	if !t.Talkspurts {
		for _, key := range []string{"spurt", "silence"} {
			if q := p.field(key); q.given() {
				q.fault("write talkspurts: true as well", "calls without talkspurts have none")
			}
		}
		return
	}
	if q := p.field("flows-arrive"); q.given() && t.FlowsArrive != FlowsNone {
		q.fault("leave out one of the two", "calls with talkspurts stand for the whole run")
	}
	t.Spurt = r.spell(p, "spurt", raw.Spurt, defaultSpurt)
	t.Silence = r.spell(p, "silence", raw.Silence, defaultSilence)
	_, err := workloads.TalkConfig{Common: sound, Spurt: t.Spurt, Silence: t.Silence}.Check()
	modelFaults(p, err, nil)
}

// spell reads a mean time above 0 and notes its default.
func (r *resolver) spell(p *place, key string, v *des.Time, or des.Time) des.Time {
	r.unless(p, key, FormatTime(or))
	return within(p.field(key), v, des.Nanosecond, 1000*des.Second, or, FormatTime)
}

// modelFaults notes what a source would refuse, each fault at the key it is
// about; as says which keys have another name there.
func modelFaults(p *place, err error, as map[string]string) {
	if err == nil {
		return
	}
	if many, ok := err.(interface{ Unwrap() []error }); ok {
		for _, e := range many.Unwrap() {
			modelFaults(p, e, as)
		}
		return
	}
	key, msg, ok := strings.Cut(err.Error(), ": ")
	if !ok || errors.Unwrap(err) != nil {
		key, msg = "model", err.Error()
	}
	if name, ok := as[key]; ok {
		key = name
	}
	p.field(key).fault("", "%s", msg)
}

// onOff reads flows that send and fall silent.
func (r *resolver) onOff(p *place, raw *rawTraffic, t *Traffic) {
	t.Hurst = float64(value(raw.Hurst, defaultHurst))
	r.unless(p, "hurst", fmt.Sprint(defaultHurst))
	t.Peak = within(p.field("peak"), raw.Peak, nodes.Kbps, maxRate, defaultPeak, FormatRate)
	r.unless(p, "peak", FormatRate(defaultPeak))
	t.OnFor = r.spell(p, "on-for", raw.OnFor, defaultOn)
	t.OffFor = r.spell(p, "off-for", raw.OffFor, defaultOff)
	if raw.Packet == nil {
		t.Packet.Mean = 1000
		r.unless(p, "packet", "1000B")
	} else if t.Packet.Kind != 0 {
		p.field("packet").fault("write one size, such as 1000B", "the packets of the model have one size")
		return
	}
	_, err := workloads.OnOffConfig{
		Common: sound, Hurst: t.Hurst, Peak: t.Peak, Packet: nodes.Bytes(t.Packet.Mean), On: t.OnFor, Off: t.OffFor,
	}.Check()
	modelFaults(p, err, map[string]string{"on": "on-for", "off": "off-for"})
}

// mmpp reads a Poisson process of two states.
func (r *resolver) mmpp(p *place, raw *rawTraffic, t *Traffic) {
	t.Low = float64(value(raw.Low, 0))
	r.unless(p, "low", "0")
	t.HighFor = r.spell(p, "high-for", raw.HighFor, defaultHigh)
	t.LowFor = r.spell(p, "low-for", raw.LowFor, defaultHigh)
	if t.Low >= 1 {
		p.field("low").fault("write a number below 1", "the low state sends as much as the high one")
	}
}

// pages reads web pages.
func (r *resolver) pages(p *place, raw *rawTraffic, t *Traffic) {
	t.Pace = within(p.field("pace"), raw.Pace, 100*nodes.Kbps, maxRate, defaultPace, FormatRate)
	r.unless(p, "pace", FormatRate(defaultPace))
	t.Parse = within(p.field("parse"), raw.Parse, des.Nanosecond, des.Minute, defaultParse, FormatTime)
	r.unless(p, "parse", FormatTime(defaultParse))
}
