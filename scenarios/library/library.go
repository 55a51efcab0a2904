// Package library holds the scenarios that come with the program. Their places
// and names are invented.
package library

import (
	"bufio"
	"bytes"
	"embed"
	"fmt"
	"io/fs"
	"path"
	"slices"
	"strings"
)

//go:embed all:files
var files embed.FS

// Demo is the scenario that commands take when none is named.
const Demo = "skerry-coast"

// Entry is one scenario of the library.
type Entry struct {
	Name  string
	About string // its about: line
}

// Names lists the library: the demo, then the others by name.
func Names() []Entry {
	dirs, err := fs.ReadDir(files, "files")
	if err != nil {
		panic("library: " + err.Error()) // embedded when the program was built
	}
	var out []Entry
	for _, d := range dirs {
		data, _, err := Open(d.Name())
		if err != nil {
			panic("library: " + err.Error())
		}
		out = append(out, Entry{Name: d.Name(), About: about(data)})
	}
	slices.SortStableFunc(out, func(a, b Entry) int {
		switch {
		case a.Name == Demo:
			return -1
		case b.Name == Demo:
			return 1
		}
		return strings.Compare(a.Name, b.Name)
	})
	return out
}

// about finds the one-line about: of a scenario.
func about(data []byte) string {
	for s := bufio.NewScanner(bytes.NewReader(data)); s.Scan(); {
		if text, ok := strings.CutPrefix(s.Text(), "about: "); ok {
			return strings.Trim(text, `"`)
		}
	}
	return ""
}

// Open returns the scenario file called name and the files beside it, such as
// demand matrices.
func Open(name string) (data []byte, beside fs.FS, err error) {
	if name == "" || path.Base(name) != name {
		return nil, nil, fmt.Errorf("no scenario is called %q", name)
	}
	beside, err = fs.Sub(files, "files/"+name)
	if err != nil {
		return nil, nil, err
	}
	data, err = fs.ReadFile(beside, "scenario.yaml")
	if err != nil {
		return nil, nil, fmt.Errorf("no scenario is called %q", name)
	}
	return data, beside, nil
}
