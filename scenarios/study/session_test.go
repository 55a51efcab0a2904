package study_test

import (
	"bytes"
	"strings"
	"testing"

	"ferrule/des"
	"ferrule/scenarios"
	"ferrule/scenarios/library"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// coast is the demo, shorter and in peace.
func coast(t *testing.T) *scenarios.Scenario {
	t.Helper()
	data, files, err := library.Open(library.Demo)
	if err != nil {
		t.Fatal(err)
	}
	sc, err := scenarios.Load("coast", data, files, []string{"run.length=2500ms", "run.warm-up=200ms", "timeline=[]", "plans.video-express-live.steps=[]"})
	if err != nil {
		t.Fatal(err)
	}
	return sc
}

// deed is an act of a test and its instant.
type deed struct {
	at des.Time
	w  scenarios.Words
}

var deeds = []deed{
	{300 * des.Millisecond, scenarios.Words{SetUp: "vx"}},
	{600 * des.Millisecond, scenarios.Words{Move: "video-tn", Onto: []string{"vx"}, Order: "kept"}},
	{900*des.Millisecond + 123_456_789, scenarios.Words{Cut: "holm-ness", Where: "120km from holm"}},
	{900*des.Millisecond + 123_456_789, scenarios.Words{Scale: "web", By: "60%"}},
	{1300 * des.Millisecond, scenarios.Words{Resize: "th", Slots: 2}},
	{1500 * des.Millisecond, scenarios.Words{Repair: "holm-ness"}},
	{1500 * des.Millisecond, scenarios.Words{Cut: "tarn-wick"}},
	{1800 * des.Millisecond, scenarios.Words{Return: "video-tn"}},
	{2200 * des.Millisecond, scenarios.Words{TearDown: "vx"}},
}

// lead plays the deeds, in steps, and looks after each if asked to.
func lead(t *testing.T, plan string, cores int, step des.Time, each func(*study.Session)) *study.Session {
	t.Helper()
	s, err := study.NewSession(t.Context(), coast(t), study.Options{Plan: plan, Cores: cores})
	if err != nil {
		t.Fatal(err)
	}
	t.Cleanup(s.Close)
	for _, d := range deeds {
		for s.Now() < d.at {
			s.Advance(min(s.Now()+step, d.at), nil)
			each(s)
		}
		if err := s.Act(&d.w); err != nil {
			t.Fatal(err)
		}
	}
	for !s.Over() {
		s.Advance(s.Now()+step, nil)
		each(s)
	}
	return s
}

func bytesOf(t *testing.T, r *result.Run) []byte {
	t.Helper()
	b, err := result.Encode(r)
	if err != nil {
		t.Fatal(err)
	}
	return b
}

// What was done by hand, in small steps and under constant looks, comes out
// again byte for byte when it is repeated at a stretch on another number of
// cores.
func TestReplayRepeatsTheSession(t *testing.T) {
	looks := 0
	s := lead(t, "", 1, 17*des.Millisecond, func(s *study.Session) {
		if looks++; looks%3 == 0 {
			s.Snapshot()
		}
	})
	r := s.Result()
	want := bytesOf(t, r)
	again, err := study.Replay(t.Context(), coast(t), s.Saved(), "saved", study.Options{Cores: 2})
	if err != nil {
		t.Fatalf("%v\n%s", err, s.Saved())
	}
	if got := bytesOf(t, again); !bytes.Equal(got, want) {
		i := 0
		for i < len(got) && i < len(want) && got[i] == want[i] {
			i++
		}
		t.Fatalf("differs at byte %d:\n%s\n%s", i, got[max(0, i-300):min(len(got), i+100)], want[max(0, i-300):min(len(want), i+100)])
	}
	if !r.Audit.OK || r.Partial {
		t.Errorf("audit %v, partial %v", r.Audit.Failures, r.Partial)
	}
	if len(r.Steps) != len(deeds) {
		t.Fatalf("%d steps for %d acts", len(r.Steps), len(deeds))
	}
	for i, x := range r.Steps {
		if i == 4 && x.State == "working" {
			continue // a resize follows the slope of ITU-T G.7044: longer than the run
		}
		if x.State != "done" || x.DoneS == nil {
			t.Errorf("%v became %s: %s", deeds[i].w, x.State, x.Detail)
		}
	}
	lost := int64(0)
	for _, c := range r.Classes {
		for _, p := range c.Periods {
			for _, l := range p.LostPackets {
				if l.Cause == "cut" {
					lost += l.Packets
				}
			}
		}
	}
	if lost == 0 {
		t.Error("two cuts lost nothing")
	}
	if plain, err := study.Run(t.Context(), coast(t), study.Options{}); err != nil || plain.ScenarioHash == r.ScenarioHash {
		t.Errorf("a session has the hash of its scenario: %v", err)
	}
}

// What snapshots say adds up: every packet that was delivered or lost is in
// one of them.
func TestSnapshotsAddUp(t *testing.T) {
	var delivered, lost int64
	var events int
	at := 0.0
	detour := false
	s := lead(t, "video-express", 1, 50*des.Millisecond, func(s *study.Session) {
		x := s.Snapshot()
		if x.FromS != at {
			t.Fatalf("a snapshot from %v after one at %v", x.FromS, at)
		}
		at = x.AtS
		events += len(x.Events)
		for _, c := range x.Classes {
			delivered += c.DeliveredPackets
			lost += c.LostPackets
		}
		for _, c := range x.Circuits {
			detour = detour || c.Name == "hn" && c.State == "up" && len(c.Fibres) > 1 && len(x.Cuts) == 1
		}
	})
	r := s.Result()
	if delivered != r.Audit.DeliveredPackets || lost != r.Audit.Lost() || events != len(r.Events) {
		t.Errorf("snapshots: %d delivered, %d lost, %d events; the run: %d, %d, %d", delivered, lost, events, r.Audit.DeliveredPackets, r.Audit.Lost(), len(r.Events))
	}
	if !detour {
		t.Error("no snapshot shows hn on its way round the cut")
	}
}

// An act that makes no sense is refused with words, and is not saved.
func TestActsAreChecked(t *testing.T) {
	s, err := study.NewSession(t.Context(), coast(t), study.Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	s.Advance(10*des.Millisecond, nil)
	for _, c := range []struct {
		w    scenarios.Words
		want string
	}{
		{scenarios.Words{}, "the act has no verb"},
		{scenarios.Words{Cut: "holm-tarn"}, `no fibre or risk group is called "holm-tarn"`},
		{scenarios.Words{Cut: "tarn-holm", Where: "400km"}, "is not on the fibre"},
		{scenarios.Words{Cut: "tarn-holm", Repair: "tarn-holm"}, "the act has two verbs"},
		{scenarios.Words{SetUp: "nix"}, "no circuit is called"},
		{scenarios.Words{SetUp: "vx, slots: 9}"}, "no circuit is called"},
		{scenarios.Words{Move: "video-tn"}, "onto: is missing"},
		{scenarios.Words{Move: "video-tn", Onto: []string{"th"}}, "carries routed traffic only"},
		{scenarios.Words{Scale: "web", By: "x"}, "x"},
		{scenarios.Words{Cut: "tarn-holm", By: "10%"}, "does not belong to cut"},
	} {
		if err := s.Act(&c.w); err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%+v: %v, want %q", c.w, err, c.want)
		}
	}
	if err := s.Act(&scenarios.Words{Cut: "tarn-holm"}); err != nil {
		t.Error(err)
	}
	if err := s.Act(&scenarios.Words{Repair: "tarn-holm"}); err == nil || !strings.Contains(err.Error(), "contradict each other") {
		t.Errorf("a repair at the instant of the cut: %v", err)
	}
	s.Advance(11*des.Millisecond, nil)
	if err := s.Act(&scenarios.Words{Repair: "tarn-holm"}); err != nil {
		t.Error(err)
	}
	if saved := string(s.Saved()); strings.Count(saved, "  - {at: ") != 2 {
		t.Errorf("saved %s", saved)
	}
	s.Advance(des.Minute, nil)
	if err := s.Act(&scenarios.Words{Cut: "tarn-holm"}); err == nil || !s.Over() {
		t.Errorf("an act after the end: %v", err)
	}
}

// A session in which nothing is done is saved too.
func TestNothingIsSaved(t *testing.T) {
	s, err := study.NewSession(t.Context(), coast(t), study.Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	if saved := string(s.Saved()); !strings.HasSuffix(saved, "acts: []\n") {
		t.Errorf("saved %s", saved)
	}
}

// A session is repeated on its own scenario only.
func TestReplayRefuses(t *testing.T) {
	s, err := study.NewSession(t.Context(), coast(t), study.Options{Cores: 1})
	if err != nil {
		t.Fatal(err)
	}
	defer s.Close()
	good := string(s.Saved())
	for what, bad := range map[string]string{ // order: does not matter because each is judged for itself
		"is not the scenario":   strings.Replace(good, "scenario-hash: \"", "scenario-hash: \"0", 1),
		"no plan is called":     strings.Replace(good, `plan: "as-is"`, `plan: "nix"`, 1),
		"unknown key":           good + "more: 1\n",
		"before the act above":  strings.Replace(good, "acts: []", "acts: [{at: 2s, cut: tarn-holm}, {at: 1s, repair: tarn-holm}]", 1),
		"after the end of the":  strings.Replace(good, "acts: []", "acts: [{at: 20s, cut: tarn-holm}]", 1),
		"waits for nothing":     strings.Replace(good, "acts: []", "acts: [{after: th up, tear-down: th}]", 1),
		"write its name only":   strings.Replace(good, "acts: []", "acts: [{at: 1s, set-up: {name: vx, slots: 3}}]", 1),
		"at: is missing":        strings.Replace(good, "acts: []", "acts: [{cut: tarn-holm}]", 1),
		"is not a time":         strings.Replace(good, "acts: []", "acts: [{at: now, cut: tarn-holm}]", 1),
		"the act has no verb":   strings.Replace(good, "acts: []", "acts: [{at: 1s}]", 1),
		"no circuit is called ": strings.Replace(good, "acts: []", "acts: [{at: 1s, tear-down: nix}]", 1),
	} {
		if _, err := study.Replay(t.Context(), coast(t), []byte(bad), "bad", study.Options{Cores: 1}); err == nil || !strings.Contains(err.Error(), what) {
			t.Errorf("%v, want %q", err, what)
		}
	}
}
