package table

import (
	"strings"
	"testing"

	"ferrule/scenarios/result"
)

// What transports did has a table of its own, of the classes that have any.
func TestTransfers(t *testing.T) {
	r := sampleRun()
	if strings.Contains(text(t, r, Options{Rows: 2}), "goodput") {
		t.Error("a table of transfers in a run without any")
	}
	r.Classes[0].Periods[0].Transfers = &result.Transfers{Asked: 2345, Complete: 2340, GoodputBps: new(12.5e6), ResentCount: 17, Timeouts: 3,
		TimeS: result.Distribution{P50: new(0.031), P95: new(0.25)}}
	got := text(t, r, Options{Rows: 2})
	want := []string{r.Classes[0].Name, "2,345", "2,340", "31.0 ms", "250 ms", "-", "-", "12.5 Mb/s", "17", "3"}
	found := false
	for _, line := range strings.Split(got, "\n") {
		found = found || strings.Join(strings.Fields(line), " ") == strings.Join(want, " ")
	}
	if !found {
		t.Errorf("no row %q in\n%s", want, got)
	}
}
