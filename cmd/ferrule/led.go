package main

import (
	"context"
	"errors"
	"fmt"

	"ferrule/scenarios"
	"ferrule/scenarios/result"
	"ferrule/scenarios/study"
)

// A led scenario can be led by hand while it runs, and what was done can be
// repeated.
type led interface {
	Session(ctx context.Context, opt options) (*study.Session, error)
	Replay(ctx context.Context, opt options, saved []byte, name string) (*result.Run, error)
}

// Session implements led.
func (l loaded) Session(ctx context.Context, opt options) (*study.Session, error) {
	return study.NewSession(ctx, l.sc, opt.study())
}

// Replay implements led.
func (l loaded) Replay(ctx context.Context, opt options, saved []byte, name string) (*result.Run, error) {
	r, err := study.Replay(ctx, l.sc, saved, name, opt.study())
	if faults := (scenarios.Problems)(nil); errors.As(err, &faults) {
		return nil, &failure{statusMisuse, fmt.Errorf("the session is not sound:\n%w", faults)}
	}
	return r, err
}
