package repolint

import (
	"go/ast"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// ban forbids a name of a package, or the whole package, in product code.
type ban struct {
	pkg    string   // import path; a path ending in "/..." stands for all below it too
	names  []string // empty: the package itself
	except []string // names that are allowed although the package is not
	free   []string // folders the ban does not reach
	why    string
}

// clocked are the folders whose code may know what the wall clock says, start
// goroutines and hold locks: those above the emulated network.
var clocked = []string{"cmd/...", "scenarios/study"}

var bans = []ban{
	{pkg: "time", names: []string{"Now", "Since", "Until", "Sleep", "After", "AfterFunc", "Tick", "NewTimer", "NewTicker"}, free: clocked,
		why: "a run must not depend on the wall clock"},
	{pkg: "sync/...", free: clocked, why: "a site's state is touched by its own events only, so it needs no lock"},
	{pkg: "math/rand", why: "use des/random, or math/rand/v2 with a source of its own"},
	{pkg: "math/rand/v2", except: []string{"New", "NewPCG", "NewChaCha8", "NewZipf", "Rand", "Source", "PCG", "ChaCha8", "Zipf"},
		why: "the global generator is seeded per process"},
	{pkg: "hash/maphash", why: "it is seeded per process"},
	{pkg: "fmt", names: []string{"Print", "Printf", "Println"}, why: "write to the writer that was handed in; nothing below cmd prints"},
	{pkg: "log/...", why: "only the program logs, and it does so through the logger handed in"},
	{pkg: "os/...", free: []string{"cmd/..."}, why: "only the program knows of files, variables and streams"},
	{pkg: "syscall", free: []string{"cmd/..."}, why: "only the program knows of the machine"},
	{pkg: "net/...", free: []string{"cmd/..."}, why: "only the program knows of the machine"},
}

// spawning are the folders that may hold go statements.
var spawning = []string{"scenarios/study", "cmd/ferrule/internal/page"}

// calls finds what bans forbid, go statements outside spawning, init
// functions and the built-in print, all in product code.
func calls(t *tree) (faults []fault) {
	for _, f := range t.product() {
		names := map[string]*ban{} // by the name the file calls the package
		for _, spec := range f.ast.Imports {
			p, _ := strconv.Unquote(spec.Path.Value)
			if p == "net/netip" { // addresses as values: it opens nothing
				continue
			}
			i := slices.IndexFunc(bans, func(b ban) bool { return within(p, b.pkg) && !among(f.dir, b.free) })
			if i < 0 {
				continue
			}
			if b := &bans[i]; len(b.names)+len(b.except) == 0 {
				faults = append(faults, t.at(spec.Pos(), "imports %s: %s", p, b.why))
			} else if spec.Name != nil && spec.Name.Name == "." {
				faults = append(faults, t.at(spec.Pos(), "imports %s by a dot", p))
			} else if spec.Name != nil {
				names[spec.Name.Name] = b
			} else {
				names[packageName(p)] = b
			}
		}
		ast.Inspect(f.ast, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.SelectorExpr:
				x, ok := n.X.(*ast.Ident)
				if !ok || names[x.Name] == nil {
					break
				}
				b := names[x.Name]
				if slices.Contains(b.names, n.Sel.Name) || len(b.except) > 0 && !slices.Contains(b.except, n.Sel.Name) {
					faults = append(faults, t.at(n.Pos(), "%s.%s: %s", b.pkg, n.Sel.Name, b.why))
				}
			case *ast.GoStmt:
				if !among(f.dir, spawning) {
					faults = append(faults, t.at(n.Pos(), "a go statement outside %s", strings.Join(spawning, " and ")))
				}
			case *ast.CallExpr:
				if id, ok := n.Fun.(*ast.Ident); ok && (id.Name == "print" || id.Name == "println") {
					faults = append(faults, t.at(n.Pos(), "the built-in %s", id.Name))
				}
			case *ast.FuncDecl:
				if n.Name.Name == "init" && n.Recv == nil {
					faults = append(faults, t.at(n.Pos(), "an init function: hidden order, global state"))
				}
			}
			return true
		})
	}
	return faults
}

// among reports whether a folder is one of those the patterns name.
func among(dir string, patterns []string) bool {
	return slices.ContainsFunc(patterns, func(p string) bool { return within(dir, p) })
}

// packageName guesses the name of a package of the standard library.
func packageName(p string) string {
	p = strings.TrimSuffix(p, "/v2")
	return p[strings.LastIndexByte(p, '/')+1:]
}

func TestNoForbiddenCalls(t *testing.T) { holds(t, calls) }

func TestForbiddenCallsAreCaught(t *testing.T) {
	bad := `package x

import (
	"fmt"
	_ "hash/maphash"
	_ "log/slog"
	"math/rand/v2"
	_ "math/rand"
	_ "os"
	_ "sync/atomic"
	clock "time"
)

func init() {}

func f() {
	clock.Sleep(clock.Second)
	fmt.Println(clock.Now())
	go f()
	_ = rand.New(rand.NewPCG(1, 2)).IntN(3)
	_ = rand.IntN(3)
	println()
}
`
	catches(t, calls, map[string]string{"des/bad.go": bad},
		"des/bad.go:5: imports hash/maphash",
		"des/bad.go:6: imports log/slog",
		"des/bad.go:8: imports math/rand",
		"des/bad.go:9: imports os",
		"des/bad.go:10: imports sync/atomic",
		"des/bad.go:14: an init function",
		"des/bad.go:17: time.Sleep",
		"des/bad.go:18: fmt.Println",
		"des/bad.go:18: time.Now",
		"des/bad.go:19: a go statement",
		"des/bad.go:21: math/rand/v2.IntN",
		"des/bad.go:22: the built-in println",
	)
	catches(t, calls, map[string]string{"scenarios/study/bad.go": bad},
		"scenarios/study/bad.go:5: imports hash/maphash",
		"scenarios/study/bad.go:6: imports log/slog",
		"scenarios/study/bad.go:8: imports math/rand",
		"scenarios/study/bad.go:9: imports os",
		"scenarios/study/bad.go:14: an init function",
		"scenarios/study/bad.go:18: fmt.Println",
		"scenarios/study/bad.go:21: math/rand/v2.IntN",
		"scenarios/study/bad.go:22: the built-in println",
	)
	catches(t, calls, map[string]string{"cmd/ferrule/bad.go": "package main\n\nfunc f() { go f() }\n"},
		"cmd/ferrule/bad.go:3: a go statement")
	catches(t, calls, map[string]string{"des/bad.go": "package x\n\nimport . \"fmt\"\n\nvar _ = Sprint(1)\n"},
		"des/bad.go:3: imports fmt by a dot")
	catches(t, calls, map[string]string{"des/good_test.go": bad})
}
