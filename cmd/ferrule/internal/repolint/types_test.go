package repolint

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"go/ast"
	"go/constant"
	"go/importer"
	"go/token"
	"go/types"
	"io"
	"maps"
	"math"
	"os"
	"os/exec"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// checked is a tree whose product code has types.
type checked struct {
	*tree
	info types.Info
}

// check gives types to the product code of a tree, folder after folder, each
// after those it imports. Packages of others come from outside.
func check(t *tree, outside types.Importer) (*checked, error) {
	c := &checked{t, types.Info{Types: map[ast.Expr]types.TypeAndValue{}, Uses: map[*ast.Ident]types.Object{}}}
	byDir := map[string][]*ast.File{}
	for _, f := range t.product() {
		byDir[f.dir] = append(byDir[f.dir], f.ast)
	}
	imp := &inside{c: c, files: byDir, outside: outside, done: map[string]*types.Package{}}
	for _, dir := range slices.Sorted(maps.Keys(byDir)) {
		if _, err := imp.Import(module + "/" + dir); err != nil {
			return nil, err
		}
	}
	return c, nil
}

// inside imports packages of the module from the tree, others from outside.
type inside struct {
	c       *checked
	files   map[string][]*ast.File
	outside types.Importer
	done    map[string]*types.Package
}

// Import gives the package of a path.
func (i *inside) Import(p string) (*types.Package, error) {
	dir, ours := strings.CutPrefix(p, module+"/")
	if !ours {
		return i.outside.Import(p)
	}
	if pkg := i.done[dir]; pkg != nil {
		return pkg, nil
	}
	conf := types.Config{Importer: i, Sizes: types.SizesFor("gc", "amd64")}
	pkg, err := conf.Check(p, i.c.fset, i.files[dir], &i.c.info)
	i.done[dir] = pkg
	return pkg, err
}

// exports imports the packages of others that the product code of a tree names
// from what the go command has compiled.
func exports(t *testing.T, tr *tree) types.Importer {
	t.Helper()
	args := []string{"list", "-deps", "-export", "-json=ImportPath,Export", "unsafe"}
	for _, f := range tr.product() {
		for _, spec := range f.ast.Imports {
			p, _ := strconv.Unquote(spec.Path.Value)
			if !within(p, module+"/...") && !slices.Contains(args, p) {
				args = append(args, p)
			}
		}
	}
	cmd := exec.Command("go", args...)
	cmd.Dir = root
	var out, diag bytes.Buffer
	cmd.Stdout, cmd.Stderr = &out, &diag
	if err := cmd.Run(); err != nil {
		t.Fatalf("go list: %v\n%s", err, diag.String())
	}
	where := map[string]string{}
	for d := json.NewDecoder(&out); ; {
		var p struct{ ImportPath, Export string }
		if err := d.Decode(&p); errors.Is(err, io.EOF) {
			break
		} else if err != nil {
			t.Fatal(err)
		}
		where[p.ImportPath] = p.Export
	}
	return importer.ForCompiler(tr.fset, "gc", func(p string) (io.ReadCloser, error) {
		if where[p] == "" {
			return nil, fmt.Errorf("no compiled package %s", p)
		}
		return os.Open(where[p])
	})
}

// keyless is what may be written beside a walk over a map, or on the line
// above it, when the result is the same in any order.
const keyless = "order: does not matter because "

// walks finds walks over maps in product code below cmd: a range over a map,
// and the iterators of package maps unless they are sorted on the spot.
func (c *checked) walks() (faults []fault) {
	for _, f := range c.product() {
		if within(f.dir, "cmd/...") {
			continue
		}
		sorted := map[ast.Expr]bool{}
		report := func(pos token.Pos, what string) {
			if !c.excused(f, pos) {
				faults = append(faults, c.at(pos, "%s, in no order; sort the keys, or write \"// %s...\"", what, keyless))
			}
		}
		ast.Inspect(f.ast, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.RangeStmt:
				if _, ok := c.info.Types[n.X].Type.Underlying().(*types.Map); ok {
					report(n.Pos(), "a range over a map")
				}
			case *ast.CallExpr:
				switch pkg, name := c.callee(n); {
				case pkg == "slices" && slices.Contains([]string{"Sorted", "SortedFunc", "SortedStableFunc"}, name):
					sorted[n.Args[0]] = true
				case pkg == "maps" && slices.Contains([]string{"All", "Keys", "Values"}, name) && !sorted[n]:
					report(n.Pos(), "maps."+name)
				}
			}
			return true
		})
	}
	return faults
}

// excused reports whether a comment on the line of a place, or on the line
// above, gives a reason why the order of a map does not matter.
func (c *checked) excused(f *file, pos token.Pos) bool {
	line := c.fset.Position(pos).Line
	return slices.ContainsFunc(f.ast.Comments, func(g *ast.CommentGroup) bool {
		_, reason, ok := strings.Cut(g.Text(), keyless)
		last := c.fset.Position(g.End()).Line
		return ok && len(strings.Fields(reason)) >= 2 && (last == line || last == line-1)
	})
}

// callee gives the package and name of a function that is called by both.
func (c *checked) callee(n *ast.CallExpr) (pkg, name string) {
	s, ok := n.Fun.(*ast.SelectorExpr)
	if !ok {
		return "", ""
	}
	f, ok := c.info.Uses[s.Sel].(*types.Func)
	if !ok || f.Pkg() == nil || f.Signature().Recv() != nil {
		return "", ""
	}
	return f.Pkg().Path(), f.Name()
}

// fused finds sums in which a product stands bare, in code whose figures reach
// a result: compilers may round such a sum once or twice, depending on the
// machine. A conversion around the product settles it; a product by a power of
// two is exact anyway.
func (c *checked) fused() (faults []fault) {
	for _, f := range c.product() {
		if within(f.dir, "cmd/...") {
			continue
		}
		bare := func(x ast.Expr) bool {
			for {
				p, ok := x.(*ast.ParenExpr)
				if !ok {
					break
				}
				x = p.X
			}
			if u, ok := x.(*ast.UnaryExpr); ok && u.Op == token.SUB {
				x = u.X
			}
			b, ok := x.(*ast.BinaryExpr)
			return ok && b.Op == token.MUL && c.info.Types[b].Value == nil && floating(c.info.Types[b].Type) &&
				!powerOfTwo(c.info.Types[b.X].Value) && !powerOfTwo(c.info.Types[b.Y].Value)
		}
		ast.Inspect(f.ast, func(n ast.Node) bool {
			switch n := n.(type) {
			case *ast.BinaryExpr:
				if (n.Op == token.ADD || n.Op == token.SUB) && (bare(n.X) || bare(n.Y)) {
					faults = append(faults, c.at(n.Pos(), "a product stands bare in a sum of floating-point numbers"))
				}
			case *ast.AssignStmt:
				if (n.Tok == token.ADD_ASSIGN || n.Tok == token.SUB_ASSIGN) && bare(n.Rhs[0]) {
					faults = append(faults, c.at(n.Pos(), "a product stands bare in a sum of floating-point numbers"))
				}
			}
			return true
		})
	}
	return faults
}

// powerOfTwo reports whether a constant is one.
func powerOfTwo(v constant.Value) bool {
	if v == nil {
		return false
	}
	x, _ := constant.Float64Val(v)
	fraction, _ := math.Frexp(math.Abs(x))
	return fraction == 0.5
}

// floating reports whether a type is one of floating-point numbers.
func floating(t types.Type) bool {
	b, ok := t.Underlying().(*types.Basic)
	return ok && b.Info()&types.IsFloat != 0
}

// typed gives types to the repository.
func typed(t *testing.T) *checked {
	t.Helper()
	tr := repository(t)
	c, err := check(tr, exports(t, tr))
	if err != nil {
		t.Fatal(err)
	}
	return c
}

func TestRulesOnTypes(t *testing.T) {
	c := typed(t)
	for name, rule := range map[string]func() []fault{"walks": c.walks, "fused": c.fused, "open": c.open} {
		t.Run(name, func(t *testing.T) {
			for _, f := range rule() {
				t.Errorf("%s: %s", f.where, f.what)
			}
		})
	}
}

// typedRule makes a rule on types one that catches takes.
func typedRule(t *testing.T, rule func(*checked) []fault) func(*tree) []fault {
	return func(tr *tree) []fault {
		c, err := check(tr, exports(t, tr))
		if err != nil {
			t.Fatal(err)
		}
		return rule(c)
	}
}

func TestWalksOverMapsAreCaught(t *testing.T) {
	catches(t, typedRule(t, (*checked).walks), map[string]string{
		"des/a.go": `package des

import (
	"maps"
	"slices"
)

type Set map[int]bool

func f(s Set, x []int) (n int) {
	for range s {
		n++
	}
	for range x {
		n++
	}
	// order: does not matter because the sum is one of integers.
	for k := range s {
		n += k
	}
	for k := range s { // order: does not matter because
		n += k
	}
	for _, k := range slices.Sorted(maps.Keys(s)) {
		n += k
	}
	for k := range maps.Keys(s) {
		n += k
	}
	return n + len(slices.Collect(maps.Values(s)))
}
`,
		"scenarios/study/b.go":      "package study\n\nimport \"ferrule/des\"\n\nfunc g(s des.Set) {\n\tfor range s {\n\t}\n}\n",
		"cmd/ferrule/main.go":       "package main\n\nfunc h(s map[int]int) {\n\tfor range s {\n\t}\n}\n",
		"scenarios/study/c_test.go": "package study\n\nfunc i(s map[int]int) {\n\tfor range s {\n\t}\n}\n",
	},
		"des/a.go:11: a range over a map",
		"des/a.go:21: a range over a map",
		"des/a.go:27: maps.Keys",
		"des/a.go:30: maps.Values",
		"scenarios/study/b.go:6: a range over a map",
	)
}

func TestBareProductsAreCaught(t *testing.T) {
	catches(t, typedRule(t, (*checked).fused), map[string]string{"des/a.go": `package des

func f(x, y, z float64, i, j int) float64 {
	z += x * y
	z = x + (y * z)
	z -= float64(x * y)
	z += float64(i*j + i)
	z += 2 * 3
	z += 8*x - y*0.25
	z = -x*y - z
	return float64(x*y) + z
}
`},
		"des/a.go:4: bare",
		"des/a.go:5: bare",
		"des/a.go:10: bare",
	)
}
