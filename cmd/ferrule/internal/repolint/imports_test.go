package repolint

import (
	"slices"
	"strconv"
	"strings"
	"testing"
)

// layer says which folders of the module the product code of a folder may
// import, besides others of the same family. A name ending in "/..." stands
// for a folder and all below it, another name for that folder alone.
type layer struct {
	dir  string
	sees []string
}

// layers are asked from the top; the first that fits a folder counts.
var layers = []layer{
	{"cmd/ferrule/internal/table/...", []string{"scenarios/result"}},
	{"cmd/...", []string{"cmd/...", "scenarios/...", "controller/...", "workloads/...", "nodes/...", "des/..."}},
	{"scenarios/result", nil},
	{"scenarios/library/...", nil},
	{"scenarios/study", []string{"scenarios/build", "scenarios/result", "scenarios", "controller/...", "workloads/...", "nodes/...", "des/..."}},
	{"scenarios/build", []string{"scenarios", "controller/...", "workloads/...", "nodes/...", "des/..."}},
	{"scenarios", []string{"controller/...", "workloads/...", "nodes/...", "des/..."}},
	{"workloads/...", []string{"workloads/...", "nodes/...", "des/..."}},
	{"controller/...", []string{"controller/...", "nodes/...", "des/..."}},
	{"nodes/...", []string{"nodes/...", "des/..."}},
	{"des/...", []string{"des/..."}},
}

// within reports whether a folder is what a pattern of layers names.
func within(dir, pattern string) bool {
	if stem, ok := strings.CutSuffix(pattern, "/..."); ok {
		return dir == stem || strings.HasPrefix(dir, stem+"/")
	}
	return dir == pattern
}

// directions finds imports against the layers, roots that import their own
// children, and conformance suites in product code. Test files in a package of
// their own (package x_test) may import what they like.
func directions(t *tree) (faults []fault) {
	for _, f := range t.files {
		if strings.HasSuffix(f.ast.Name.Name, "_test") {
			continue
		}
		i := slices.IndexFunc(layers, func(l layer) bool { return within(f.dir, l.dir) })
		for _, spec := range f.ast.Imports {
			p, _ := strconv.Unquote(spec.Path.Value)
			to, ours := strings.CutPrefix(p, module+"/")
			switch {
			case !ours:
				if p == "testing" && !f.test && !strings.HasSuffix(f.dir, "test") {
					faults = append(faults, t.at(spec.Pos(), "product code imports testing"))
				}
			case i < 0:
				faults = append(faults, t.at(spec.Pos(), "%s has no layer", f.dir))
			case !slices.ContainsFunc(layers[i].sees, func(s string) bool { return within(to, s) }):
				faults = append(faults, t.at(spec.Pos(), "%s may not import %s", f.dir, to))
			case !strings.Contains(f.dir, "/") && strings.HasPrefix(to, f.dir+"/"):
				faults = append(faults, t.at(spec.Pos(), "the root package of %s imports its child %s", f.dir, to))
			case strings.HasSuffix(to, "test") && !f.test:
				faults = append(faults, t.at(spec.Pos(), "product code imports the test suite %s", to))
			}
		}
	}
	return faults
}

func TestImportsPointDownward(t *testing.T) { holds(t, directions) }

func TestImportsAgainstTheDirectionAreCaught(t *testing.T) {
	imports := func(pkg, p string) string { return "package " + pkg + "\n\nimport _ \"" + p + "\"\n" }
	catches(t, directions, map[string]string{
		"cmd/ferrule/good.go":               imports("main", "ferrule/des/measure"),
		"cmd/ferrule/internal/table/bad.go": imports("table", "ferrule/scenarios/study"),
		"controller/bad.go":                 imports("controller", "ferrule/controller/path"),
		"controller/central/bad.go":         imports("central", "ferrule/workloads"),
		"controller/central/x_test.go":      imports("central_test", "ferrule/workloads"),
		"controller/central/y_test.go":      imports("central", "ferrule/scenarios"),
		"des/bad.go":                        imports("des", "ferrule/des/random"),
		"des/measure/bad.go":                imports("measure", "ferrule/nodes"),
		"des/measure/good.go":               imports("measure", "ferrule/des/random"),
		"nodes/packet/bad.go":               imports("packet", "ferrule/nodes/queue/queuetest"),
		"nodes/packet/good_test.go":         imports("packet", "ferrule/nodes/queue/queuetest"),
		"nodes/queue/bad.go":                imports("queue", "testing"),
		"nodes/queue/queuetest/good.go":     imports("queuetest", "testing"),
		"scenarios/bad.go":                  imports("scenarios", "ferrule/scenarios/library"),
		"scenarios/build/bad.go":            imports("build", "ferrule/scenarios/study"),
		"scenarios/result/bad.go":           imports("result", "ferrule/des"),
		"scenarios/study/good.go":           imports("study", "ferrule/scenarios/build"),
		"strange/bad.go":                    imports("strange", "ferrule/des"),
		"workloads/bad.go":                  imports("workloads", "ferrule/controller"),
	},
		"cmd/ferrule/internal/table/bad.go:3: may not import scenarios/study",
		"controller/bad.go:3: the root package of controller imports its child",
		"controller/central/bad.go:3: may not import workloads",
		"controller/central/y_test.go:3: may not import scenarios",
		"des/bad.go:3: the root package of des imports its child",
		"des/measure/bad.go:3: may not import nodes",
		"nodes/packet/bad.go:3: imports the test suite nodes/queue/queuetest",
		"nodes/queue/bad.go:3: product code imports testing",
		"scenarios/bad.go:3: may not import scenarios/library",
		"scenarios/build/bad.go:3: may not import scenarios/study",
		"scenarios/result/bad.go:3: may not import des",
		"strange/bad.go:3: strange has no layer",
		"workloads/bad.go:3: may not import controller",
	)
}
