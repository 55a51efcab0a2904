package main

import (
	"errors"
	"slices"

	"ferrule/scenarios"
)

// withCuts returns a copy of sc whose timeline has the cuts of --cut too, or
// every fault in them. The copy's hash tells it from sc.
func withCuts(sc *scenarios.Scenario, cuts []string) (*scenarios.Scenario, error) {
	if len(cuts) == 0 {
		return sc, nil
	}
	with := *sc
	with.Timeline = slices.Clone(sc.Timeline)
	var faults []error
	for _, text := range cuts {
		acts, err := sc.ParseCut(text)
		if err != nil {
			faults = append(faults, err)
			continue
		}
		with.Timeline = append(with.Timeline, acts...)
	}
	if faults != nil {
		return nil, errors.Join(faults...)
	}
	parts := make([][]byte, len(cuts))
	for i, text := range cuts {
		parts[i] = []byte("--cut " + text)
	}
	with.Hash = scenarios.Hash([]byte(sc.Hash), nil, parts)
	return &with, nil
}
