package repolint

import (
	"fmt"
	"maps"
	"slices"
	"strconv"
	"strings"
	"testing"
)

// requirement is one line of go.mod: a module we need, and whether go.mod
// calls it indirect.
type requirement struct {
	path     string
	indirect bool
}

// requirements reads them from a tree, in the order of go.mod.
func requirements(t *tree) (all []requirement) {
	i := slices.IndexFunc(t.texts, func(x text) bool { return x.name == "go.mod" })
	if i < 0 {
		return nil
	}
	block := false
	for line := range strings.Lines(t.texts[i].body) {
		words := strings.Fields(line)
		switch {
		case len(words) == 2 && words[0] == "require" && words[1] == "(":
			block = true
		case len(words) == 1 && words[0] == ")":
			block = false
		case len(words) >= 3 && words[0] == "require":
			all = append(all, requirement{words[1], strings.HasSuffix(strings.TrimSpace(line), "// indirect")})
		case len(words) >= 2 && block:
			all = append(all, requirement{words[0], strings.HasSuffix(strings.TrimSpace(line), "// indirect")})
		}
	}
	return all
}

// libraries are those the product is built on, by the packages it imports.
var libraries = []string{"github.com/spf13/viper", "gonum.org/v1/gonum/stat/distuv",
	"github.com/olekukonko/tablewriter", "go.uber.org/zap"}

// required finds modules that go.mod calls direct and nothing imports, modules
// that are imported but called indirect or not named, and libraries that the
// product does not use.
func required(t *tree) (faults []fault) {
	used, inProduct := map[string]bool{}, map[string]bool{}
	for _, f := range t.files {
		for _, spec := range f.ast.Imports {
			p, _ := strconv.Unquote(spec.Path.Value)
			used[p] = true
			inProduct[p] = inProduct[p] || !f.test
		}
	}
	all := requirements(t)
	for _, r := range all {
		direct := false
		for p := range used {
			direct = direct || owner(all, p) == r.path
		}
		if direct == r.indirect {
			faults = append(faults, fault{"go.mod", fmt.Sprintf("%s: indirect is %t, but imported is %t", r.path, r.indirect, direct)})
		}
	}
	for _, p := range slices.Sorted(maps.Keys(used)) {
		first, _, _ := strings.Cut(p, "/")
		if strings.Contains(first, ".") && owner(all, p) == "" {
			faults = append(faults, fault{"go.mod", "does not name the module of " + p})
		}
	}
	for _, p := range libraries {
		if !inProduct[p] {
			faults = append(faults, fault{"go.mod", "the product does not import " + p})
		}
	}
	return faults
}

// owner gives the module a package belongs to, or "".
func owner(all []requirement, p string) (best string) {
	for _, r := range all {
		if within(p, r.path+"/...") && len(r.path) > len(best) {
			best = r.path
		}
	}
	return best
}

func TestRequirementsAreTrue(t *testing.T) { holds(t, required) }

func TestUntrueRequirementsAreCaught(t *testing.T) {
	catches(t, required, map[string]string{
		"go.mod": "module ferrule\n\ngo 1.26\n\nrequire github.com/spf13/viper v1 // indirect\n\nrequire (\n" +
			"\tgithub.com/olekukonko/tablewriter v1\n\tgo.uber.org/zap v1\n\tgonum.org/v1/gonum v0\n\texample.org/unused v1\n" +
			"\texample.org/under v1 // indirect\n)\n",
		"des/a.go": "package des\n\nimport (\n\t_ \"fmt\"\n\t_ \"github.com/olekukonko/tablewriter\"\n\t_ \"github.com/spf13/viper\"\n" +
			"\t_ \"gonum.org/v1/gonum/stat/distuv\"\n\t_ \"example.org/strange/x\"\n)\n",
		"des/a_test.go": "package des\n\nimport _ \"go.uber.org/zap\"\n",
	},
		"go.mod: github.com/spf13/viper: indirect is true, but imported is true",
		"go.mod: example.org/unused: indirect is false, but imported is false",
		"go.mod: does not name the module of example.org/strange/x",
		"go.mod: the product does not import go.uber.org/zap",
	)
}
