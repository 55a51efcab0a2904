package scenarios

import (
	"fmt"
	"reflect"
	"slices"
	"strings"

	"go.yaml.in/yaml/v3"
)

// maxSet is how long one option may be.
const maxSet = 4096

// overlay lays options such as "circuits.vx.slots=4" over the tree, in order,
// and returns the keys at the top that were changed. An element of a list is
// called by its name; circuits.NAME also finds circuits that a plan or the
// timeline sets up.
func (t *tree) overlay(sets []string) []string {
	var changed []string
	for _, set := range sets {
		o := option{t: t, text: clip("--set " + set)}
		if len(set) > maxSet {
			o.fault("", "is longer than 4096 characters", "write it into the file")
			continue
		}
		path, text, ok := strings.Cut(set, "=")
		if !ok || path == "" {
			o.fault("", "is not of the form path=value", "write for instance --set run.seed=7")
			continue
		}
		if o.value = o.parse(path, text); o.value == nil {
			continue
		}
		o.descend(t.root, reflect.TypeFor[rawScenario](), path, path)
		for _, section := range o.sections {
			if !slices.Contains(changed, section) {
				changed = append(changed, section)
			}
		}
	}
	return changed
}

// An option is one --set at work.
type option struct {
	t        *tree
	text     string // as listed in faults
	value    *yaml.Node
	sections []string
}

// fault notes that the option is wrong.
func (o *option) fault(key, msg, hint string) {
	o.t.faults.add(Pos{File: o.text}, key, msg, hint)
}

// parse reads the value of the option.
func (o *option) parse(path, text string) *yaml.Node {
	var doc yaml.Node
	if nested([]byte(text)) > maxDepth {
		o.fault(path, "the value is nested too deeply", "write it into the file")
		return nil
	}
	if err := yaml.Unmarshal([]byte(text), &doc); err != nil || doc.Kind != yaml.DocumentNode {
		o.fault(path, fmt.Sprintf("%q is not a value", text), "write for instance "+path+"=4")
		return nil
	}
	left := maxSet
	n := o.t.expand(doc.Content[0], 0, &left, false)
	if n != nil {
		o.mark(n)
	}
	return n
}

// mark notes that n and all in it came from the option.
func (o *option) mark(n *yaml.Node) {
	o.t.marked[n] = o.text
	for _, c := range n.Content {
		o.mark(c)
	}
}

// descend follows rest, the end of path, from n, which holds a value of typ,
// and puts the value there. It reports whether it arrived.
func (o *option) descend(n *yaml.Node, typ reflect.Type, path, rest string) bool {
	for typ.Kind() == reflect.Pointer {
		typ = typ.Elem()
	}
	switch {
	case n.Kind == yaml.SequenceNode && typ.Kind() == reflect.Slice:
		return o.element(n, typ.Elem(), path, rest)
	case n.Kind == yaml.MappingNode && opaque[typ]:
		key, more, deeper := strings.Cut(rest, ".")
		i := find(n, key)
		if i < 0 || !deeper {
			o.put(n, key)
			return true
		}
		return o.descend(n.Content[i+1], typ, path, more)
	case n.Kind == yaml.MappingNode && typ.Kind() == reflect.Struct && !scalars[typ]:
		return o.key(n, typ, path, rest)
	default:
		o.fault(path, fmt.Sprintf("nothing stands at %q", rest), "end the path before it")
		return false
	}
}

// key goes on at a key of a mapping, and makes it if it is not there.
func (o *option) key(n *yaml.Node, typ reflect.Type, path, rest string) bool {
	tags := tagsOf(typ)
	f := longest(rest, tags)
	if f < 0 {
		first, _, _ := strings.Cut(rest, ".")
		o.fault(path, fmt.Sprintf("unknown key %q", first), didYouMean(first, tags))
		return false
	}
	if typ == reflect.TypeFor[rawScenario]() {
		if tags[f] == "circuits" && o.circuits(path, strings.TrimPrefix(rest, "circuits.")) {
			return true
		}
		o.sections = append(o.sections, tags[f])
	}
	more := strings.TrimPrefix(rest[len(tags[f]):], ".")
	if more == "" {
		o.put(n, tags[f])
		return true
	}
	i := find(n, tags[f])
	if i < 0 {
		made := &yaml.Node{Kind: yaml.MappingNode, Tag: "!!map"}
		o.t.marked[made] = o.text
		o.pair(n, tags[f], made)
		i = find(n, tags[f])
	}
	return o.descend(n.Content[i+1], typ.Field(f).Type, path, more)
}

// element goes on at the element of a list that is called by the beginning of
// rest.
func (o *option) element(n *yaml.Node, typ reflect.Type, path, rest string) bool {
	names := make([]string, len(n.Content))
	for i, c := range n.Content {
		if names[i] = elementName(c, typ == reflect.TypeFor[rawFibre]()); names[i] == "" {
			names[i] = fmt.Sprint(i)
		}
	}
	i := longest(rest, names)
	if i < 0 {
		first, _, _ := strings.Cut(rest, ".")
		o.fault(path, fmt.Sprintf("nothing is called %q there", first), didYouMean(first, names))
		return false
	}
	c, more := n.Content[i], strings.TrimPrefix(rest[len(names[i]):], ".")
	if more == "" {
		n.Content[i] = o.value
		return true
	}
	if inner := circuitIn(c); inner != nil {
		c, typ = inner, reflect.TypeFor[rawCircuit]()
	}
	return o.descend(c, typ, path, more)
}

// elementName is what an element of a list is called: its name, or for a fibre
// without one its ends.
func elementName(n *yaml.Node, fibre bool) string {
	if name := nameOf(n); name != "" || !fibre || n == nil || n.Kind != yaml.MappingNode {
		return name
	}
	if i := find(n, "between"); i >= 0 && len(n.Content[i+1].Content) == 2 {
		ends := n.Content[i+1].Content
		return ends[0].Value + "-" + ends[1].Value
	}
	return ""
}

// circuitIn is the circuit that an act sets up, or nil.
func circuitIn(n *yaml.Node) *yaml.Node {
	if n.Kind != yaml.MappingNode {
		return nil
	}
	for _, key := range []string{"circuit", "set-up"} {
		if i := find(n, key); i >= 0 && n.Content[i+1].Kind == yaml.MappingNode {
			return n.Content[i+1]
		}
	}
	return nil
}

// circuits handles circuits.NAME for circuits that acts set up: all of that
// name are changed. It reports whether rest names one of them and none of the
// circuits in place.
func (o *option) circuits(path, rest string) bool {
	top := o.t.top()
	if c := top.field("circuits"); c.given() {
		for _, n := range c.node.Content {
			if name := nameOf(n); name != "" && longest(rest, []string{name}) == 0 {
				return false
			}
		}
	}
	found := false
	visit := func(acts *place, section string) {
		if !acts.given() {
			return
		}
		for _, act := range acts.node.Content {
			n := circuitIn(act)
			name := nameOf(n)
			if name == "" || longest(rest, []string{name}) < 0 || len(rest) == len(name) {
				continue
			}
			if o.descend(n, reflect.TypeFor[rawCircuit](), path, rest[len(name)+1:]) {
				o.sections = append(o.sections, section)
			}
			found = true
		}
	}
	visit(top.field("timeline"), "timeline")
	if plans := top.field("plans"); plans.given() {
		for i := range plans.node.Content {
			visit(plans.item(i).field("in-place"), "plans")
			visit(plans.item(i).field("steps"), "plans")
		}
	}
	return found
}

// put sets a key of n to the value of the option.
func (o *option) put(n *yaml.Node, key string) { o.pair(n, key, o.value) }

// pair sets a key of n.
func (o *option) pair(n *yaml.Node, key string, value *yaml.Node) {
	if i := find(n, key); i >= 0 {
		n.Content[i+1] = value
		return
	}
	k := &yaml.Node{Kind: yaml.ScalarNode, Tag: "!!str", Value: key}
	o.t.marked[k] = o.text
	n.Content = append(n.Content, k, value)
}

// longest is the index of the longest of names that rest begins with, followed
// by a dot or nothing, or -1.
func longest(rest string, names []string) int {
	best := -1
	for i, n := range names {
		if !strings.HasPrefix(rest, n) || len(rest) > len(n) && rest[len(n)] != '.' {
			continue
		}
		if best < 0 || len(n) > len(names[best]) {
			best = i
		}
	}
	return best
}
