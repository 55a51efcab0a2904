package controller

import (
	"slices"
	"testing"
)

// Names in reports are fixed: results show them.
func TestNames(t *testing.T) {
	var got []string
	for s := Planned; s <= Blocked; s++ {
		got = append(got, s.String())
	}
	for s := Waiting; s <= Never; s++ {
		got = append(got, s.String())
	}
	for k := SetUp; k <= Request; k++ {
		got = append(got, k.String())
	}
	want := []string{
		"planned", "setting up", "up", "up unprotected", "resizing", "down", "restoring", "tearing down", "torn down", "blocked",
		"waiting", "working", "done", "failed", "never", "set-up", "tear-down", "resize", "move", "return", "request",
	}
	if !slices.Equal(got, want) {
		t.Errorf("got %q", got)
	}
}
