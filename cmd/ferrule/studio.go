package main

import (
	"context"
	"io/fs"

	"go.uber.org/zap"

	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// A studio is what the commands need of the packages below: it loads scenarios
// and keeps a library of them. Tests put one in its place that computes
// nothing.
type studio interface {
	// Load reads a scenario, lays sets over it and adds cuts to its timeline.
	Load(in input) (scenario, error)

	// Library lists the embedded scenarios.
	Library() []entry

	// Open returns an embedded scenario and the files beside it; "" names the
	// demo.
	Open(name string) (in input, err error)

	// Coverage studies how often intervals hold the truth.
	Coverage(ctx context.Context, opt options, experiments int, seconds float64) ([]covered, error)
}

// An entry is one embedded scenario.
type entry struct{ name, about string }

// An input is a scenario as text, with what the command line adds.
type input struct {
	name  string // stands for it in messages
	data  []byte
	files fs.FS    // read for matrices
	sets  []string // path=value
	cuts  []string // NAME[:120km]@6s[..9s]
}

// Options say how to study a scenario.
type options struct {
	plan     string
	seed     uint64
	cores    int // at least 1
	log      *zap.Logger
	margin   float64                   // of a comparison, as study.Options has it
	store    store                     // of finished replications; nil: none
	runs     bool                      // batch and compare also hand out the runs of the first seed
	progress func(done, total float64) // may be called from any goroutine
	measured sheet                     // to which a check is held; no name: none
}

// A sheet is a file of rows.
type sheet struct {
	name string
	data []byte
}

// A store keeps finished replications: study.Store.
type store interface {
	Load(name string) ([]byte, error)
	Save(name string, data []byte) error
}

// A precision says when a batch has enough seeds: study.Precision.
type precision struct {
	figure        string
	relative      float64
	periods       []string
	first, atMost int
}

// A scenario is loaded and can be studied. When ctx ends first, a study
// returns what is known, marked partial, or nil, and an error that is
// ctx.Err().
type scenario interface {
	Seed() uint64       // as the file has it
	Hash() string       // of the scenario as loaded
	Plans() []string    // as-is first
	Matrices() []string // the files of demand it reads
	Run(ctx context.Context, opt options) (*result.Run, error)
	Batch(ctx context.Context, opt options, seeds []uint64) (*result.Batch, error)
	BatchUntil(ctx context.Context, opt options, p precision) (*result.Batch, error)
	Compare(ctx context.Context, opt options, base string, plans []string, seeds []uint64) (*result.Comparison, error)
	Failures(ctx context.Context, opt options, w study.Sweep) (*result.Failures, error)
	Grow(ctx context.Context, opt options, base string, plans []string, seeds []uint64, factors []float64) (*result.Comparison, error)
	Size(ctx context.Context, opt options, q sizeQuestion) (*result.Sizing, error)
	Check(ctx context.Context, opt options) (*result.Check, error)
}
