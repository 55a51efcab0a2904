package scenarios

import (
	"errors"
	"flag"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/google/go-cmp/cmp"

	"ferrule/workloads"
)

// update writes the faults that are found into the files that expect them. Read
// each of them before you commit it.
var update = flag.Bool("update", false, "rewrite the expected faults in testdata")

// load reads a scenario of testdata.
func load(t testing.TB, name string, sets ...string) (*Scenario, error) {
	t.Helper()
	data, err := os.ReadFile(filepath.Join("testdata", name))
	if err != nil {
		t.Fatal(err)
	}
	return Load(name, data, os.DirFS("testdata"), sets)
}

// mustLoad reads a scenario of testdata that has no fault.
func mustLoad(t testing.TB, name string, sets ...string) *Scenario {
	t.Helper()
	s, err := load(t, name, sets...)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// Each file *.bad.yaml has one fault; its first line says which.
func TestOneFault(t *testing.T) {
	names, err := filepath.Glob("testdata/*.bad.yaml")
	if err != nil {
		t.Fatal(err)
	}
	if len(names) < 100 {
		t.Fatalf("%d files with a fault, want 100 and more", len(names))
	}
	for _, path := range names {
		name := filepath.Base(path)
		t.Run(strings.TrimSuffix(name, ".bad.yaml"), func(t *testing.T) {
			s, err := load(t, name)
			if err == nil || s != nil {
				t.Fatal("no fault was found")
			}
			var problems Problems
			if !errors.As(err, &problems) || len(problems) != 1 {
				t.Fatalf("want one fault, got:\n%v", err)
			}
			data, _ := os.ReadFile(path)
			first, rest, _ := strings.Cut(string(data), "\n")
			got := strings.TrimPrefix(err.Error(), name+":")
			if *update {
				if err := os.WriteFile(path, []byte("# want:"+got+"\n"+rest), 0o644); err != nil {
					t.Fatal(err)
				}
				return
			}
			if want := strings.TrimPrefix(first, "# want:"); got != want {
				t.Errorf("fault\n got %s\nwant %s", got, want)
			}
		})
	}
}

// All faults of a file and its matrix are found at once, in the order in which
// they stand.
func TestManyFaults(t *testing.T) {
	_, err := load(t, "many.yaml", "run.sed=4", "circuits.th.slots=two")
	if err == nil {
		t.Fatal("no fault was found")
	}
	const path = "testdata/many.want"
	if *update {
		if err := os.WriteFile(path, []byte(err.Error()+"\n"), 0o644); err != nil {
			t.Fatal(err)
		}
	}
	want, _ := os.ReadFile(path)
	if diff := cmp.Diff(strings.Split(string(want), "\n"), strings.Split(err.Error()+"\n", "\n")); diff != "" {
		t.Errorf("faults (-want +got):\n%s", diff)
	}
}

// Every codec that a file can name is one that workloads has.
func TestCodecs(t *testing.T) {
	for _, name := range codecs {
		if _, err := workloads.ParseCodec(name); err != nil {
			t.Error(err)
		}
	}
}
