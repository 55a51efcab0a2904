package repolint

import (
	"go/ast"
	"go/constant"
	"go/types"
	"slices"
	"strings"
	"testing"
)

// open finds switches over an enumeration of ours, in product code, that have
// neither a default nor a panic behind them: a value added later would fall
// through in silence.
func (c *checked) open() (faults []fault) {
	for _, f := range c.product() {
		if strings.HasSuffix(f.dir, "test") {
			continue
		}
		ast.Inspect(f.ast, func(n ast.Node) bool {
			var list []ast.Stmt
			switch n := n.(type) {
			case *ast.BlockStmt:
				list = n.List
			case *ast.CaseClause:
				list = n.Body
			}
			for i, x := range list {
				if l, ok := x.(*ast.LabeledStmt); ok {
					x = l.Stmt
				}
				s, ok := x.(*ast.SwitchStmt)
				if !ok || s.Tag == nil || !enumeration(c.info.Types[s.Tag].Type) || closed(s, list[i+1:]) {
					continue
				}
				faults = append(faults, c.at(s.Pos(), "a switch over %s without a default", c.info.Types[s.Tag].Type))
			}
			return true
		})
	}
	return faults
}

// closed reports whether a switch has a default or a panic behind it.
func closed(s *ast.SwitchStmt, after []ast.Stmt) bool {
	for _, x := range s.Body.List {
		if len(x.(*ast.CaseClause).List) == 0 {
			return true
		}
	}
	if len(after) == 0 {
		return false
	}
	e, ok := after[0].(*ast.ExprStmt)
	if !ok {
		return false
	}
	call, ok := e.X.(*ast.CallExpr)
	if !ok {
		return false
	}
	id, ok := call.Fun.(*ast.Ident)
	return ok && id.Name == "panic"
}

// enumeration reports whether a type is a named integer of ours whose constants
// count from 0, two at least. Quantities, whose constants are units, are none,
// and neither are sets of bits.
func enumeration(t types.Type) bool {
	named, ok := t.(*types.Named)
	if !ok || named.Obj().Pkg() == nil || !strings.HasPrefix(named.Obj().Pkg().Path(), module+"/") {
		return false
	}
	scope := named.Obj().Pkg().Scope()
	var values []int64
	for _, name := range scope.Names() {
		if k, ok := scope.Lookup(name).(*types.Const); ok && k.Type() == t && k.Val().Kind() == constant.Int {
			v, _ := constant.Int64Val(k.Val())
			values = append(values, v)
		}
	}
	slices.Sort(values)
	for i, v := range values {
		if v != int64(i) {
			return false
		}
	}
	return len(values) >= 2
}

func TestOpenSwitchesAreCaught(t *testing.T) {
	catches(t, typedRule(t, (*checked).open), map[string]string{"des/a.go": `package des

type kind int

const (
	red kind = iota
	blue
)

type number int

type length int

const metre, kilometre length = 1, 1000

func f(k kind, n number, l length) {
	switch l {
	case metre:
	}
	switch k {
	case red:
	}
	switch k {
	case red:
	default:
	}
	switch n {
	case 1:
	}
	switch k {
	case red:
		switch k {
		case blue:
		}
	default:
	}
	switch k {
	case red:
		return
	}
	panic("des: unknown kind")
}
`},
		"des/a.go:20: a switch over ferrule/des.kind without a default",
		"des/a.go:32: a switch over ferrule/des.kind without a default",
	)
}
