package study

import (
	"context"
	"fmt"

	"ferrule/scenarios/result"
)

// A Store keeps finished replications, so that a study that was killed repeats
// none of them. It may be used from several goroutines at once, each with
// names of its own.
type Store interface {
	// Load returns what was saved under a name; nil when nothing was.
	Load(name string) ([]byte, error)

	// Save keeps data under a name, whole or not at all, and returns once it
	// would outlive a loss of power.
	Save(name string, data []byte) error
}

// resuming returns run, or when there is a store one that takes what it holds
// in place of running it, and saves what it runs. Either way the run is what
// was read back from its encoded form, so that a study gives the same bytes
// whether it was resumed or not. hash is that of the scenario. A stored run that is
// damaged or of something else is an error.
func resuming(run replicate, store Store, hash string) replicate {
	if store == nil {
		return run
	}
	return func(ctx context.Context, j job, progress func(done, total float64)) (*result.Run, error) {
		name := storedName(hash, j)
		data, err := store.Load(name)
		if err != nil {
			return nil, err
		}
		if data != nil {
			return readBack(data, hash, j)
		}
		r, err := run(ctx, j, progress)
		if err != nil || r.Partial {
			return r, err
		}
		if data, err = result.Encode(r); err != nil {
			return nil, err
		}
		if err = store.Save(name, data); err != nil {
			return nil, err
		}
		return readBack(data, hash, j)
	}
}

// storedName names the replication of a scenario under a plan with a seed.
func storedName(hash string, j job) string { return fmt.Sprintf("%.16s-%s-%d", hash, j.plan, j.seed) }

// readBack decodes a stored run and makes sure that it is the one asked for.
func readBack(data []byte, hash string, j job) (*result.Run, error) {
	r, err := result.DecodeRun(data)
	if err != nil {
		return nil, fmt.Errorf("stored run %s: %w", storedName(hash, j), err)
	}
	if r.ScenarioHash != hash || r.Plan != j.plan || r.Seed != j.seed || r.Partial {
		return nil, fmt.Errorf("stored run %s: holds plan %s, seed %d of another scenario or run", storedName(hash, j), r.Plan, r.Seed)
	}
	return r, nil
}
