package scenarios

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"io/fs"
	"math"
	"net/netip"
	"slices"
	"strings"

	"ferrule/nodes"
	"ferrule/workloads/replay"
)

// Limits of what is replayed.
const (
	maxReplays    = 32  // traffic entries of the model
	maxAssign     = 256 // rules of one traffic
	minTimeScale  = 1e-6
	maxTimeScale  = 1e6
	maxUnseekable = maxFile // of a file that can only be read from end to end
)

// resolveReplays reads the files that are replayed, once the classes are known.
func (r *resolver) resolveReplays() {
	list := r.t.top().field("traffic")
	replays := 0
	for i := range r.raw.Traffic {
		t, raw, p := &r.s.Traffic[i], &r.raw.Traffic[i], list.item(i)
		if t.Model != ModelReplay || !p.field("model").given() {
			continue
		}
		if replays++; replays > maxReplays {
			p.fault(fmt.Sprintf("write %d at most", maxReplays), "too many files are replayed")
			return
		}
		show := func(x percent) string { return fmt.Sprintf("%.6g%%", float64(x)*100) }
		t.Loop = value(raw.Loop, false)
		r.unless(p, "loop", "false")
		t.TimeScale = float64(within(p.field("time-scale"), raw.TimeScale, minTimeScale, maxTimeScale, 1, show))
		format := r.choice(p.field("format"), raw.Format, formatWords, 0)
		spec := replay.Spec{Name: raw.File, Format: replay.Format(format)}
		for c := range r.s.Classes {
			spec.Classes = append(spec.Classes, r.s.Classes[c].Name)
			spec.DSCP = append(spec.DSCP, r.s.Classes[c].DSCP)
		}
		before := len(r.t.faults.list)
		spec.Rules = r.rules(p.field("assign"), raw.Assign)
		if q := p.field("file"); q.given() && raw.File != "" && len(r.t.faults.list) == before {
			t.Trace = r.trace(q, raw.File, spec)
		} else if q.given() && q.node.Value == "" {
			q.fault("name a file beside the scenario, such as traffic.pcap", "is empty")
		}
		if q := p.field("assign"); q.given() && t.Trace != nil && t.Trace.Format() == replay.Packets {
			q.fault("leave it out", "a table of packets names the classes itself")
		}
	}
}

// rules reads the rules of a replay; without any the code points decide.
func (r *resolver) rules(p *place, raw []rawAssign) []replay.Rule {
	if !p.given() {
		return nil
	}
	if len(raw) > maxAssign {
		p.fault(fmt.Sprintf("write %d at most", maxAssign), "%d rules are too many", len(raw))
		return nil
	}
	out := make([]replay.Rule, 0, len(raw))
	for i := range raw {
		a, q := &raw[i], p.item(i)
		rule := replay.Rule{DSCP: nodes.None, From: prefix(q.field("from"), a.From), To: prefix(q.field("to"), a.To)}
		if a.DSCP != nil {
			rule.DSCP = int(*a.DSCP)
		}
		rule.Ways = replay.Ways(r.choice(q.field("way"), a.Way, wayWords, int(replay.Both)))
		if c := q.field("class"); c.given() {
			rule.Class = nodes.ClassID(r.classes.find(c, a.Class))
		} else {
			r.missing(q, "class", "write class: and the name of a class")
		}
		out = append(out, rule)
	}
	return out
}

// prefix reads a range of addresses; a single one stands for itself.
func prefix(p *place, text string) netip.Prefix {
	if text == "" {
		if p.given() && p.node.Value == "" {
			p.fault("write one such as 192.0.2.0/24 or 2001:db8::/32", "is empty")
		}
		return netip.Prefix{}
	}
	if a, err := netip.ParseAddr(text); err == nil && a.Zone() == "" {
		return netip.PrefixFrom(a, a.BitLen())
	}
	x, err := netip.ParsePrefix(text)
	if err != nil {
		p.fault("write one such as 192.0.2.0/24 or 2001:db8::/32", "%q is not a range of addresses", text)
		return netip.Prefix{}
	}
	if x != x.Masked() {
		p.fault("write "+x.Masked().String(), "%q has bits behind its length", text)
	}
	return x
}

// trace reads a file from end to end, or notes what is wrong with it.
func (r *resolver) trace(p *place, name string, spec replay.Spec) *replay.Trace {
	file, size, done, err := openCapture(r.files, name)
	if err != nil {
		p.fault("name a file beside the scenario, such as traffic.pcap", "%q cannot be read: %v", name, err)
		return nil
	}
	if !slices.Contains(r.t.faults.files, name) {
		r.t.faults.files = append(r.t.faults.files, name)
	}
	t, err := replay.Open(file, size, spec)
	if err != nil || t.Held() {
		done()
	}
	var bad *replay.Fault
	if errors.As(err, &bad) {
		r.t.faults.add(Pos{File: name, Line: bad.Line, Col: bad.Col}, "", bad.Where()+bad.Msg, bad.Hint)
		return nil
	}
	if !slices.Contains(r.s.Captures, name) {
		r.s.Captures = append(r.s.Captures, name)
		r.matrices = append(r.matrices, t.Sum())
	}
	return t
}

// openCapture opens a file by a relative name; done gives it back.
func openCapture(files fs.FS, name string) (file io.ReaderAt, size int64, done func(), err error) {
	switch {
	case !fs.ValidPath(name) || strings.ContainsAny(name, "\\:"):
		return nil, 0, nil, errors.New("a name is relative and without \"..\"")
	case files == nil:
		return nil, 0, nil, errors.New("no files can be read here")
	}
	plain := func(err error) error {
		var path *fs.PathError
		if errors.As(err, &path) {
			return path.Err
		}
		return err
	}
	f, err := files.Open(name)
	if err != nil {
		return nil, 0, nil, plain(err)
	}
	info, err := f.Stat()
	if err == nil && !info.Mode().IsRegular() {
		err = errors.New("it is not a plain file")
	}
	if err != nil {
		f.Close()
		return nil, 0, nil, plain(err)
	}
	if at, ok := f.(io.ReaderAt); ok {
		return at, info.Size(), func() { f.Close() }, nil
	}
	defer f.Close()
	data, err := io.ReadAll(io.LimitReader(f, maxUnseekable+1))
	if err == nil && len(data) > maxUnseekable {
		err = errors.New("it has more than 8 MB")
	}
	return bytes.NewReader(data), int64(len(data)), func() {}, err
}

// replayed sets the speed and the load of an aggregate whose traffic is a
// replay.
func (r *resolver) replayed(p *place, a *Aggregate) {
	if p.field("load").given() && a.Load == 0 {
		return
	}
	if field, msg, hint := r.speeds(a); msg != "" {
		p.field(field).fault(hint, "%s", msg)
	}
}

// speeds sets how fast a replay goes each way: as its traffic says, or so that
// the load is met, if there is one. What is wrong is said about a key of the
// aggregate.
func (r *resolver) speeds(a *Aggregate) (field, msg, hint string) {
	if a.Traffic < 0 || a.Class < 0 || r.s.Traffic[a.Traffic].Trace == nil {
		return "", "", ""
	}
	t := &r.s.Traffic[a.Traffic]
	class := r.s.Classes[a.Class].Name
	if a.Load > 0 && t.TimeScale != 1 {
		return "load", fmt.Sprintf("the traffic %s says how fast it goes", t.Name), "leave out load, or the time-scale"
	}
	most := 0.0
	for d := range nodes.Direction(2) {
		if d == nodes.Back && !a.BothWays {
			break
		}
		if t.Trace.Share(a.Class, d).Packets == 0 {
			way := "the way there"
			if d == nodes.Back {
				way = "the way back"
			}
			return "class", fmt.Sprintf("%s holds no packets of %s for %s", t.Trace.Name(), class, way), "mind assign, or the code points of the classes"
		}
		load := t.Trace.Load(a.Class, d)
		a.Speed[d] = 1 / t.TimeScale
		if a.Load > 0 {
			a.Speed[d] = float64(a.Load) / load
		}
		if a.Speed[d] < minTimeScale || a.Speed[d] > maxTimeScale {
			return "load", fmt.Sprintf("%s has %.3g bit/s of %s", t.Trace.Name(), load, class), "write a load that is nearer"
		}
		most = max(most, float64(load*a.Speed[d]))
	}
	if most > float64(maxRate) {
		return "traffic", fmt.Sprintf("%.3g bit/s of %s pass %s", most, class, FormatRate(maxRate)), "write a larger time-scale"
	}
	if a.Load == 0 {
		a.Load = nodes.Rate(max(1, math.Round(most)))
	}
	return "", "", ""
}
