package repolint

import (
	"go/ast"
	"go/format"
	"go/token"
	"path"
	"regexp"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// Bounds on what one sitting can read, in lines.
const (
	longestFile     = 800
	longestFunction = 100
)

// formatted finds files gofmt would change.
func formatted(t *tree) (faults []fault) {
	for _, f := range t.files {
		if out, err := format.Source([]byte(f.src)); err != nil {
			faults = append(faults, fault{f.name, err.Error()})
		} else if string(out) != f.src {
			faults = append(faults, fault{f.name, "not as gofmt writes it"})
		}
	}
	return faults
}

// sizes finds files and functions that are too long, tests included.
func sizes(t *tree) (faults []fault) {
	for _, f := range t.files {
		if n := strings.Count(f.src, "\n"); n > longestFile {
			faults = append(faults, fault{f.name, strconv.Itoa(n) + " lines"})
		}
		for _, d := range f.ast.Decls {
			fn, ok := d.(*ast.FuncDecl)
			if !ok {
				continue
			}
			if n := t.fset.Position(fn.End()).Line - t.fset.Position(fn.Pos()).Line + 1; n > longestFunction {
				faults = append(faults, t.at(fn.Pos(), "%s has %d lines", fn.Name.Name, n))
			}
		}
	}
	return faults
}

// documented finds packages and exported names of product code without a
// comment: functions, methods of exported types and of exported interfaces,
// types, constants and variables. A group's comment serves its members, and so
// does a comment behind a name. Fields are left to the comment of their struct,
// which often says more in one sentence.
func documented(t *tree) (faults []fault) {
	packages := map[string]bool{}
	var dirs []string
	for _, f := range t.product() {
		if !slices.Contains(dirs, f.dir) {
			dirs = append(dirs, f.dir)
		}
		packages[f.dir] = packages[f.dir] || len(f.ast.Doc.Text()) > 0
		for _, d := range f.ast.Decls {
			switch d := d.(type) {
			case *ast.FuncDecl:
				if d.Name.IsExported() && exportedReceiver(d) && !opens(d.Doc, d.Name.Name) {
					faults = append(faults, t.at(d.Pos(), "no comment that opens with %s", d.Name.Name))
				}
			case *ast.GenDecl:
				for _, s := range d.Specs {
					faults = append(faults, t.undocumented(d, s)...)
				}
			}
		}
	}
	for _, dir := range dirs {
		if !packages[dir] {
			faults = append(faults, fault{dir, "no package comment"})
		}
	}
	return faults
}

// undocumented finds the exported names of one declaration without a comment.
func (t *tree) undocumented(d *ast.GenDecl, s ast.Spec) (faults []fault) {
	switch s := s.(type) {
	case *ast.TypeSpec:
		if !s.Name.IsExported() {
			break
		}
		group := s.Doc == nil && d.Doc != nil && (d.Lparen.IsValid() || opens(d.Doc, s.Name.Name))
		if !group && !opens(s.Doc, s.Name.Name) {
			faults = append(faults, t.at(s.Pos(), "no comment that opens with %s", s.Name.Name))
		}
		if x, ok := s.Type.(*ast.InterfaceType); ok {
			faults = append(faults, t.bare(s.Name.Name, x.Methods)...)
		}
	case *ast.ValueSpec:
		if d.Doc != nil || s.Doc != nil || s.Comment != nil {
			break
		}
		for _, n := range s.Names {
			if n.IsExported() {
				faults = append(faults, t.at(n.Pos(), "no comment on %s", n.Name))
			}
		}
	}
	return faults
}

// bare finds exported methods of an interface without a comment.
func (t *tree) bare(of string, methods *ast.FieldList) (faults []fault) {
	for _, m := range methods.List {
		for _, n := range m.Names {
			if n.IsExported() && m.Doc == nil && m.Comment == nil {
				faults = append(faults, t.at(n.Pos(), "no comment on %s.%s", of, n.Name))
			}
		}
	}
	return faults
}

// opens reports whether a comment's first words, an article apart, name what
// it stands on.
func opens(doc *ast.CommentGroup, name string) bool {
	words := strings.Fields(doc.Text())
	if len(words) > 1 && slices.Contains([]string{"A", "An", "The"}, words[0]) {
		words = words[1:]
	}
	return len(words) > 0 && strings.TrimRight(words[0], ",.:;'s") == strings.TrimRight(name, "s")
}

// exportedReceiver reports whether a function has no receiver or one of an
// exported type.
func exportedReceiver(d *ast.FuncDecl) bool {
	if d.Recv == nil {
		return true
	}
	x := d.Recv.List[0].Type
	for {
		switch y := x.(type) {
		case *ast.StarExpr:
			x = y.X
		case *ast.IndexExpr:
			x = y.X
		case *ast.IndexListExpr:
			x = y.X
		case *ast.Ident:
			return y.IsExported()
		default:
			panic("repolint: a receiver of unknown form")
		}
	}
}

// undone matches a note that something is left to do. It is put together so
// that this file does not hold one.
var undone = regexp.MustCompile(`\b(TO` + `DO|FIX` + `ME|XX` + `X)\b`)

// finished finds skipped tests, and notes left in comments and other texts.
func finished(t *tree) (faults []fault) {
	for _, f := range t.files {
		for _, g := range f.ast.Comments {
			for _, c := range g.List {
				if note := undone.FindString(c.Text); note != "" {
					faults = append(faults, t.at(c.Pos(), "a %s", note))
				}
			}
		}
		if !f.test && !strings.HasSuffix(f.dir, "test") {
			continue
		}
		ast.Inspect(f.ast, func(n ast.Node) bool {
			if s, ok := n.(*ast.SelectorExpr); ok && slices.Contains([]string{"Skip", "Skipf", "SkipNow"}, s.Sel.Name) {
				faults = append(faults, t.at(s.Pos(), "a skipped test"))
			}
			return true
		})
	}
	for _, x := range t.texts {
		if strings.Contains(x.name, "/vendor/") {
			continue // of others, kept as they gave it
		}
		if note := undone.FindString(x.body); note != "" {
			faults = append(faults, fault{x.name, "a " + note})
		}
	}
	return faults
}

// machine matches an absolute path that means something on one machine only.
var machine = regexp.MustCompile("(?m)(?:^|[\\s\"'`(=:])(/(?:work|tmp|root|home|Users|private)(?:/[^\\s\"'`)]*)?)(?:$|[\\s\"'`),;:])")

// portable finds paths of one machine in any text outside testdata.
func portable(t *tree) (faults []fault) {
	for _, f := range t.files {
		for _, m := range machine.FindAllStringSubmatchIndex(f.src, -1) {
			pos := t.fset.File(f.ast.Pos()).Pos(m[2])
			faults = append(faults, t.at(pos, "the path of one machine %s", f.src[m[2]:m[3]]))
		}
	}
	for _, x := range t.texts {
		if strings.Contains(x.name, "testdata/") {
			continue
		}
		for _, m := range machine.FindAllStringSubmatch(x.body, -1) {
			faults = append(faults, fault{x.name, "the path of one machine " + m[1]})
		}
	}
	return faults
}

// entries are all the top of the repository holds.
var entries = []string{".ci", ".gitignore", "DEVELOPERS.md", "LICENSE", "README.md",
	"cmd", "controller", "des", "go.mod", "go.sum", "nodes", "scenarios", "workloads"}

// tidy finds entries at the top that do not belong there, and those that miss.
func tidy(t *tree) (faults []fault) {
	for _, e := range t.top {
		if !slices.Contains(entries, e) && !made(e) && e != "dist" {
			faults = append(faults, fault{e, "does not belong at the top"})
		}
	}
	for _, e := range entries {
		if !slices.Contains(t.top, e) {
			faults = append(faults, fault{e, "missing at the top"})
		}
	}
	return faults
}

func TestEveryFileIsFormatted(t *testing.T)  { holds(t, formatted) }
func TestNothingIsTooLong(t *testing.T)      { holds(t, sizes) }
func TestEveryNameIsDocumented(t *testing.T) { holds(t, documented) }
func TestNothingIsLeftUndone(t *testing.T)   { holds(t, finished) }
func TestNoPathOfOneMachine(t *testing.T)    { holds(t, portable) }
func TestTopOfTheRepository(t *testing.T)    { holds(t, tidy) }

func TestUnformattedFilesAreCaught(t *testing.T) {
	catches(t, formatted, map[string]string{
		"des/bad.go":  "package des\n\nvar  a = 1\n",
		"des/good.go": "package des\n\nvar b = 1\n",
	}, "des/bad.go: gofmt")
}

func TestLongFilesAndFunctionsAreCaught(t *testing.T) {
	fn := func(lines int) string { return "package des\n\nfunc f() {" + strings.Repeat("\n", lines-1) + "}\n" }
	catches(t, sizes, map[string]string{
		"des/a.go":      fn(longestFunction),
		"des/b.go":      fn(longestFunction + 1),
		"des/c_test.go": "package des\n" + strings.Repeat("\n", longestFile-1),
		"des/d_test.go": "package des\n" + strings.Repeat("\n", longestFile),
	}, "des/b.go:3: f has 101 lines", "des/d_test.go: 801 lines")
}

func TestMissingCommentsAreCaught(t *testing.T) {
	catches(t, documented, map[string]string{
		"des/a.go": `package des

type A struct{ N int }

// Wrong opening.
func (a *A) Do() {}

func (a *A) undo() {}

func F() {}

type hidden struct{ Y int }

func (h *hidden) Z() {}

const C = 1

// These belong together.
const (
	D = 2
	E = 3
)

// An I is documented, its methods are not.
type I interface {
	Run()
}
`,
		"des/a_test.go":  "package des\n\nfunc G() {}\n",
		"nodes/doc.go":   "// Package nodes has a comment.\npackage nodes\n",
		"nodes/nodes.go": "package nodes\n\n// H does.\nfunc H() {}\n",
		"workloads/x.go": "package workloads\n",
	},
		"des/a.go:3: no comment that opens with A",
		"des/a.go:6: no comment that opens with Do",
		"des/a.go:10: no comment that opens with F",
		"des/a.go:16: no comment on C",
		"des/a.go:26: no comment on I.Run",
		"des: no package comment",
		"workloads: no package comment",
	)
}

func TestUnfinishedWorkIsCaught(t *testing.T) {
	todo, fixme := "TO"+"DO", "FIX"+"ME"
	catches(t, finished, map[string]string{
		"des/a.go":         "package des\n\n// " + todo + ": more.\nvar a = \"" + fixme + "\"\n",
		"des/a_test.go":    "package des\n\nimport \"testing\"\n\nfunc TestX(t *testing.T) { t.Skip() }\n",
		"des/b_test.go":    "package des\n\nimport \"testing\"\n\nfunc BenchmarkX(b *testing.B) { b.Skipf(\"\") }\n",
		"des/x/xtest/a.go": "package xtest\n\nimport \"testing\"\n\nfunc X(t *testing.T) { t.SkipNow() }\n",
		"cmd/vendor/a.js":  "// " + todo + "\n",
		"README.md":        "Nothing is left.\n",
		"DEVELOPERS.md":    "Here is a " + fixme + ".\n",
	},
		"des/a.go:3: a "+todo,
		"des/a_test.go:5: a skipped test",
		"des/b_test.go:5: a skipped test",
		"des/x/xtest/a.go:5: a skipped test",
		"DEVELOPERS.md: a "+fixme,
	)
}

func TestPathsOfOneMachineAreCaught(t *testing.T) {
	there := "/" + "tmp/x.json"
	catches(t, portable, map[string]string{
		"des/a.go":           "package des\n\n// See " + there + ", there.\nvar a = \"/" + "work\"\n",
		"des/b.go":           "package des\n\n// Work or /worker, a/home and https://example.org/tmp are no such paths.\nvar b = 1\n",
		"des/testdata/c.txt": there + "\n",
		"README.md":          "    ferrule --out=" + there + "\n",
		"scenarios/x/s.yaml": "file: /" + "root/demand.csv\n",
	},
		"des/a.go:3: "+there,
		"des/a.go:4: /"+"work",
		"README.md: "+there,
		"scenarios/x/s.yaml: /"+"root/demand.csv",
	)
}

func TestStrayEntriesAreCaught(t *testing.T) {
	files := map[string]string{"notes.txt": "", "ferrule": "", "heap.prof": ""}
	for _, e := range entries[1:] {
		if path.Ext(e) == "" && e != "LICENSE" {
			e += "/x.txt"
		}
		files[e] = ""
	}
	catches(t, tidy, files, "notes.txt: does not belong", ".ci: missing")
}

// The rules above read positions through the token package: a tree whose files
// are not all in one set would give nonsense.
func TestOneSetOfFiles(t *testing.T) {
	tr := repository(t)
	seen := map[string]bool{}
	tr.fset.Iterate(func(f *token.File) bool {
		seen[f.Name()] = true
		return true
	})
	for _, f := range tr.files {
		if !seen[f.name] {
			t.Errorf("%s is not in the set", f.name)
		}
	}
}
