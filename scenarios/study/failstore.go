package study

import (
	"encoding/json"
	"fmt"

	"ferrule/des/random"
)

// trialName names what is stored of trial i of a group: by scenario, plan and
// seed, and by what fails and how it is looked at.
func (f *fleet) trialName(g *group, i int) string {
	b := &f.list[i]
	what := fmt.Sprint(b.kind, " ", b.name, " ", f.w.Scale, " ", f.at, " ", f.w.After)
	return fmt.Sprintf("%.16s-%s-%d-%016x", f.sc.Hash, f.w.Plans[g.plan], f.w.Seeds[g.seed], random.Hash(what))
}

// recall takes from the store what an earlier sweep has finished.
func (f *fleet) recall() error {
	if f.store == nil {
		return nil
	}
	for k := range f.groups {
		g := &f.groups[k]
		for i := range f.list {
			name := f.trialName(g, i)
			data, err := f.store.Load(name)
			if err != nil {
				return err
			}
			if data == nil {
				continue
			}
			t := &trial{}
			if err := json.Unmarshal(data, t); err != nil {
				return fmt.Errorf("stored trial %s: %w", name, err)
			}
			if t.Head.ScenarioHash != f.sc.Hash || t.Seed != f.w.Seeds[g.seed] {
				return fmt.Errorf("stored trial %s: holds another scenario or seed", name)
			}
			g.trials[i] = t
			g.open--
		}
	}
	return nil
}

// keep stores trial i of a group.
func (f *fleet) keep(g *group, i int, t *trial) error {
	if f.store == nil {
		return nil
	}
	data, err := json.Marshal(t)
	if err != nil {
		return err
	}
	return f.store.Save(f.trialName(g, i), data)
}
