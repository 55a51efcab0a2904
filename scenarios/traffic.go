package scenarios

import (
	"errors"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"ferrule/des"
	"ferrule/des/random"
	"ferrule/nodes"
	"ferrule/workloads"
	"ferrule/workloads/transport"
)

// modelKeys are the keys that each model uses, beside those of every model.
var modelKeys = [][]string{
	ModelConstant: {"packet", "rate"},
	ModelPoisson:  {"packet", "rate"},
	ModelVoice:    {"codec", "flows-arrive", "hold", "talkspurts", "spurt", "silence"},
	ModelVideo:    {"rate", "frames", "group-of-pictures", "flows-arrive", "hold"},
	ModelFiles:    {"size", "pace"},
	ModelOnOff:    {"packet", "hurst", "peak", "on-for", "off-for"},
	ModelMMPP:     {"packet", "low", "high-for", "low-for"},
	ModelPages:    {"pace", "parse"},
	ModelReplay:   {"file", "format", "loop", "time-scale", "assign"},
	ModelWeb:      {"size", "transport"},
	ModelBulk:     {"transport"},
}

// resolveTraffic reads the ways of sending.
func (r *resolver) resolveTraffic() {
	list := r.t.top().field("traffic")
	for i := range r.raw.Traffic {
		raw, p := &r.raw.Traffic[i], list.item(i)
		t := Traffic{Name: raw.Name, Pos: p.pos(), Start: value(raw.Start, 0), Stop: value(raw.Stop, des.Never)}
		r.traffic.add(r, p, raw.Name)
		model := r.choice(p.field("model"), raw.Model, modelWords, -1)
		if !p.field("model").given() {
			r.missing(p, "model", oneOf(modelWords))
		}
		r.interval(p, t.Start, t.Stop)
		if model >= 0 {
			t.Model = Model(model)
			r.modelUses(p, t.Model)
			r.model(p, raw, &t)
		}
		r.s.Traffic = append(r.s.Traffic, t)
	}
}

// modelUses finds keys that the model has no use for.
func (r *resolver) modelUses(p *place, m Model) {
	for _, key := range tagsOf(reflect.TypeFor[rawTraffic]()) {
		if slices.Contains([]string{"name", "model", "start", "stop"}, key) { // of every model
			continue
		}
		if q := p.field(key); q.given() && !slices.Contains(modelKeys[m], key) {
			q.fault("the model uses "+strings.Join(modelKeys[m], ", "), "the model %s does not use it", m)
		}
	}
}

// model reads what the model needs.
func (r *resolver) model(p *place, raw *rawTraffic, t *Traffic) {
	need := func(key, hint string) {
		if !p.field(key).given() {
			r.missing(p, key, hint)
		}
	}
	rate := func(key string, v *nodes.Rate) nodes.Rate {
		return within(p.field(key), v, 1, maxRate, 0, FormatRate)
	}
	t.Packet = r.packet(p.field("packet"), raw.Packet)
	switch t.Model {
	case ModelConstant, ModelPoisson:
		need("packet", "write for instance packet: 1500B")
		t.Rate = rate("rate", raw.Rate)
	case ModelVoice:
		r.flows(p, raw, t)
		t.Codec = codecs[r.choice(p.field("codec"), raw.Codec, codecs, 0)]
		r.unless(p, "codec", defaultCodec)
		r.talk(p, raw, t)
	case ModelVideo:
		r.flows(p, raw, t)
		need("rate", "write the mean rate of one flow, such as 8Mbps")
		t.Rate = within(p.field("rate"), raw.Rate, 1, maxRate/8, 0, FormatRate)
		t.Frames = within(p.field("frames"), (*float64)(raw.Frames), 0.1, 1000, defaultFrames, perSecond)
		r.unless(p, "frames", perSecond(defaultFrames))
		t.GroupOfPictures = within(p.field("group-of-pictures"), raw.GroupOfPictures, 1, 1000, defaultPictures, plain)
		r.unless(p, "group-of-pictures", plain(defaultPictures))
	case ModelFiles:
		need("size", "write for instance size: 80kB")
		need("pace", "write the rate at which a file is sent, such as 100Mbps")
		t.Size = random.Spec(value(raw.Size, byteLaw{}))
		t.Pace = rate("pace", raw.Pace)
		if raw.Size != nil && t.Size.Kind == random.Constant && t.Size.Mean < 1 {
			p.field("size").fault("write 1B or more", "a file holds something")
		} else if raw.Size != nil {
			_, err := workloads.FilesConfig{Common: sound, Size: t.Size}.Check()
			lawFault(p.field("size"), err)
		}
	case ModelWeb:
		need("size", "write for instance size: 80kB")
		t.Size = random.Spec(value(raw.Size, byteLaw{}))
		r.transportOf(p, raw, t)
		if raw.Size != nil {
			lawFault(p.field("size"), transferSize(t.Size))
		}
	case ModelBulk:
		r.transportOf(p, raw, t)
	case ModelOnOff:
		r.onOff(p, raw, t)
	case ModelMMPP:
		need("packet", "write for instance packet: 1000B")
		r.mmpp(p, raw, t)
	case ModelPages:
		r.pages(p, raw, t)
	case ModelReplay: // read with the classes: see resolveReplays
		need("file", "write the name of a capture or a table beside the scenario")
	default:
		panic("scenarios: unknown model " + t.Model.String())
	}
}

// transportOf reads which transport sends.
func (r *resolver) transportOf(p *place, raw *rawTraffic, t *Traffic) {
	t.Transport = transport.Algorithm(r.choice(p.field("transport"), raw.Transport, transportWords, int(transport.Cubic)))
	r.unless(p, "transport", transportWords[transport.Cubic])
}

// transferSize is what is wrong with a law of the bytes of a transfer.
func transferSize(s random.Spec) error {
	law, err := s.Law()
	switch {
	case err != nil:
		return err
	case law.Mean() < 1:
		return errors.New("a transfer holds a byte or more")
	case law.Mean() > transport.Endless/10:
		return errors.New("the mean of a transfer is 100 MB at most; bulk sends without end")
	}
	return nil
}

// packet reads the size of a packet; 0 is none.
func (r *resolver) packet(p *place, raw *byteLaw) random.Spec {
	if raw == nil {
		return random.Spec{}
	}
	s := random.Spec(*raw)
	least, most := s.Mean, s.Mean
	if s.Kind == random.Mix {
		least, most = slices.Min(s.Values), slices.Max(s.Values)
	} else if s.Kind != random.Constant {
		least, most = 1, 1
	}
	if least < 1 || most > float64(maxPacket) {
		p.fault("write 1B to 65535B (RFC 791)", "a packet of that size is out of range")
		return s
	}
	_, err := workloads.StreamConfig{Common: sound, Size: s}.Check()
	lawFault(p, err)
	return s
}

// sound is a configuration without a fault, to have one law of it checked.
var sound = workloads.Common{Name: "check", Load: nodes.Gbps}

// lawFault notes that a source would refuse the law at p.
func lawFault(p *place, err error) {
	if err != nil {
		p.fault("", "%s", strings.TrimPrefix(err.Error(), "size: "))
	}
}

// flows reads how flows come and go.
func (r *resolver) flows(p *place, raw *rawTraffic, t *Traffic) {
	t.FlowsArrive = FlowArrival(r.choice(p.field("flows-arrive"), raw.FlowsArrive, arrivalWords, int(FlowsNone)))
	r.unless(p, "flows-arrive", "none")
	hold := p.field("hold")
	switch {
	case (raw.FlowsArrive == "" || raw.FlowsArrive == "none") && hold.given():
		hold.fault("write flows-arrive: poisson or regular as well", "flows that do not arrive do not end either")
	case t.FlowsArrive != FlowsNone && !hold.given():
		r.missing(p, "hold", "write how long a flow lasts, such as 180s")
	}
	t.Hold = held(hold, raw.Hold)
}

// held reads how long something lasts, which is not nothing.
func held(p *place, raw *timeLaw) random.Spec {
	s := random.Spec(value(raw, timeLaw{}))
	if raw != nil && s.Kind == random.Constant && s.Mean == 0 {
		p.fault("write for instance 180s", "lasts no time")
	}
	return s
}

// interval checks a start and a stop.
func (r *resolver) interval(p *place, start, stop des.Time) {
	if start >= stop {
		p.field("stop").fault("write a later one", "stops at %s, before it starts at %s", FormatTime(stop), FormatTime(start))
	} else if start >= r.s.Run.Length && p.field("start").given() && r.raw.Run.Length != nil {
		p.field("start").fault("write an earlier one, or a longer run", "starts at %s, and the run ends at %s",
			FormatTime(start), FormatTime(r.s.Run.Length))
	}
}

// perSecond writes a frequency.
func perSecond(x float64) string { return strconv.FormatFloat(x, 'g', -1, 64) + "/s" }
