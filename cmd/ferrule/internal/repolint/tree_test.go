package repolint

import (
	"fmt"
	"go/ast"
	"go/parser"
	"go/token"
	"io/fs"
	"maps"
	"os"
	"path"
	"path/filepath"
	"slices"
	"strings"
	"sync"
	"testing"
	"unicode/utf8"
)

// module is the path of the module these tests watch over.
const module = "ferrule"

// root leads from this package's folder to the top of the repository.
const root = "../../../.."

// file is one Go file. Names are relative to the top, with forward slashes.
type file struct {
	name string
	dir  string // "des", "cmd/ferrule/internal/table"
	src  string
	ast  *ast.File
	test bool // its name ends in _test.go
}

// text is any other file that holds text.
type text struct{ name, body string }

// tree is what the rules look at: the repository or a sample.
type tree struct {
	fset  *token.FileSet
	files []*file  // in order of names
	texts []text   // in order of names
	top   []string // the entries at the top, in order, without .git
}

// fault is one breach of a rule.
type fault struct {
	where string // name, or name:line
	what  string
}

// at names a place in a file.
func (t *tree) at(pos token.Pos, format string, args ...any) fault {
	p := t.fset.Position(pos)
	return fault{fmt.Sprintf("%s:%d", p.Filename, p.Line), fmt.Sprintf(format, args...)}
}

// product gives the files that end up in a program, in order.
func (t *tree) product() []*file {
	return slices.DeleteFunc(slices.Clone(t.files), func(f *file) bool { return f.test })
}

// add takes one file into the tree.
func (t *tree) add(name, src string) error {
	if !strings.HasSuffix(name, ".go") || strings.Contains(name, "testdata/") {
		if utf8.ValidString(src) && !strings.Contains(src, "\x00") {
			t.texts = append(t.texts, text{name, src})
		}
		return nil
	}
	f, err := parser.ParseFile(t.fset, name, src, parser.ParseComments|parser.SkipObjectResolution)
	if err != nil {
		return err
	}
	t.files = append(t.files, &file{name, path.Dir(name), src, f, strings.HasSuffix(name, "_test.go")})
	return nil
}

// sample makes a tree of files given by name and text.
func sample(t *testing.T, files map[string]string) *tree {
	t.Helper()
	tr := &tree{fset: token.NewFileSet()}
	for _, name := range slices.Sorted(maps.Keys(files)) {
		if err := tr.add(name, files[name]); err != nil {
			t.Fatal(err)
		}
		if first, _, _ := strings.Cut(name, "/"); !slices.Contains(tr.top, first) {
			tr.top = append(tr.top, first)
		}
	}
	return tr
}

// repository gives the repository these tests belong to.
func repository(t *testing.T) *tree {
	t.Helper()
	tr, err := once()
	if err != nil {
		t.Fatal(err)
	}
	if len(tr.files) < 100 {
		t.Fatalf("only %d Go files found: the walk does not start at the top of the repository", len(tr.files))
	}
	return tr
}

// once reads the repository once; rules only look.
var once = sync.OnceValues(func() (*tree, error) {
	tr := &tree{fset: token.NewFileSet()}
	entries, err := os.ReadDir(root)
	if err != nil {
		return nil, err
	}
	for _, e := range entries {
		if e.Name() != ".git" {
			tr.top = append(tr.top, e.Name())
		}
	}
	return tr, filepath.WalkDir(root, func(p string, d fs.DirEntry, err error) error {
		if err != nil {
			return err
		}
		name, err := filepath.Rel(root, p)
		if err != nil {
			return err
		}
		name = filepath.ToSlash(name)
		if d.IsDir() {
			if name == ".git" || name == "dist" {
				return filepath.SkipDir
			}
			return nil
		}
		if made(name) {
			return nil
		}
		src, err := os.ReadFile(p)
		if err != nil {
			return err
		}
		return tr.add(name, string(src))
	})
})

// made reports whether a file is one that tools leave and .gitignore names.
func made(name string) bool {
	return name == "ferrule" || strings.HasSuffix(name, ".test") || strings.HasSuffix(name, ".prof")
}

// holds fails the test for every fault the rule finds in the repository.
func holds(t *testing.T, rule func(*tree) []fault) {
	t.Helper()
	for _, f := range rule(repository(t)) {
		t.Errorf("%s: %s", f.where, f.what)
	}
}

// catches checks that a rule finds exactly the faults wanted, given as
// "where: part of what", in any file of the sample.
func catches(t *testing.T, rule func(*tree) []fault, files map[string]string, want ...string) {
	t.Helper()
	got := rule(sample(t, files))
	for i, f := range got {
		if i >= len(want) {
			t.Errorf("not a fault, but reported: %s: %s", f.where, f.what)
			continue
		}
		where, what, _ := strings.Cut(want[i], ": ")
		if f.where != where || !strings.Contains(f.what, what) {
			t.Errorf("got  %s: %s\nwant %s", f.where, f.what, want[i])
		}
	}
	if len(got) < len(want) {
		t.Errorf("not caught: %q", want[len(got):])
	}
}
