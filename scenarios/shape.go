package scenarios

import (
	"fmt"
	"reflect"
	"slices"

	"go.yaml.in/yaml/v3"
)

// shaper compares the tree with the raw types: keys that are unknown or given
// twice, lists where names are wanted, and the like. It takes what is wrong
// out of the tree, so that the rest can be read and checked as well.
type shaper struct {
	t       *tree
	removed bool
	spoilt  map[*yaml.Node]bool // mappings out of which something was taken
}

// Limits on values whose checks take more than linear time.
const (
	maxLawKeys = 16    // keys of a law
	maxWords   = 1000  // words of a list
	maxThings  = 40000 // named things of a list
)

// tagsOf lists the keys of a raw struct in order.
func tagsOf(typ reflect.Type) []string {
	out := make([]string, typ.NumField())
	for i := range out {
		out[i] = typ.Field(i).Tag.Get("mapstructure")
	}
	return out
}

// walk checks the value at p against typ and reports whether it may stay.
func (s *shaper) walk(p *place, typ reflect.Type) bool {
	for typ.Kind() == reflect.Pointer {
		typ = typ.Elem()
	}
	n := p.node
	if n.Kind == yaml.ScalarNode && n.ShortTag() == "!!null" {
		p.fault("leave the key out, or give it a value", "has no value")
		return false
	}
	switch {
	case opaque[typ]:
		return s.anyValue(p)
	case typ.Kind() == reflect.Struct && !scalars[typ]:
		if n.Kind != yaml.MappingNode {
			p.fault("write { "+tagsOf(typ)[0]+": ..., ... }", "%s stands where a mapping is wanted", kindOf(n))
			return false
		}
		s.mapping(p, typ)
		return true
	case typ.Kind() == reflect.Slice:
		if n.Kind != yaml.SequenceNode {
			hint := "write [a, b]"
			if elem := typ.Elem(); elem.Kind() == reflect.Struct {
				hint = "write a list, such as [ { " + tagsOf(elem)[0] + ": ... }, ... ]"
			}
			p.fault(hint, "%s stands where a list is wanted", kindOf(n))
			return false
		}
		most := maxWords
		if typ.Elem().Kind() == reflect.Struct {
			most = maxThings
		}
		if len(n.Content) > most {
			p.fault(fmt.Sprintf("write %d at most", most), "%d values are too many", len(n.Content))
			return false
		}
		kept := n.Content[:0:0]
		for i, c := range n.Content {
			if s.walk(p.item(i), typ.Elem()) {
				kept = append(kept, c)
			} else {
				s.removed = true
				s.spoilt[n] = true
			}
		}
		n.Content = kept
		return true
	default:
		if n.Kind != yaml.ScalarNode {
			p.fault("write one value", "%s stands where one value is wanted", kindOf(n))
			return false
		}
		return s.scalar(p)
	}
}

// mapping checks the keys of a mapping against the fields of typ.
func (s *shaper) mapping(p *place, typ reflect.Type) {
	n := p.node
	tags := tagsOf(typ)
	kept := make([]*yaml.Node, 0, len(n.Content))
	for i := 0; i+1 < len(n.Content); i += 2 {
		key, value := n.Content[i], n.Content[i+1]
		if !s.keyOK(p, key, kept) {
			continue
		}
		f := slices.Index(tags, key.Value)
		if f < 0 {
			s.drop(n)
			hint := ""
			if !s.t.faults.full() {
				hint = didYouMean(key.Value, tags)
			}
			if key.Value == "<<" {
				hint = "merging is not done here; write the keys out"
			}
			s.t.faults.add(s.t.pos(key), join(p.key(), key.Value), "unknown key", hint)
			continue
		}
		q := &place{t: s.t, up: p, node: value, name: key.Value}
		if !s.walk(q, typ.Field(f).Type) {
			s.drop(n)
			continue
		}
		kept = append(kept, key, value)
	}
	n.Content = kept
}

// keyOK checks that a key is a word and new.
func (s *shaper) keyOK(p *place, key *yaml.Node, kept []*yaml.Node) bool {
	if key.Kind != yaml.ScalarNode {
		s.drop(p.node)
		s.t.faults.add(s.t.pos(key), p.key(), kindOf(key)+" stands where a key is wanted", "write a word")
		return false
	}
	for j := 0; j < len(kept); j += 2 {
		if kept[j].Value == key.Value {
			s.drop(p.node)
			first := s.t.pos(kept[j])
			s.t.faults.add(s.t.pos(key), join(p.key(), key.Value), "is given twice",
				fmt.Sprintf("it was given at line %d", first.Line))
			return false
		}
	}
	return true
}

// drop notes that something was taken out of n.
func (s *shaper) drop(n *yaml.Node) {
	s.removed = true
	s.spoilt[n] = true
}

// anyValue checks what does not depend on a type: keys given twice, odd
// numbers, missing values.
func (s *shaper) anyValue(p *place) bool {
	n := p.node
	switch n.Kind {
	case yaml.MappingNode:
		if len(n.Content) > 2*maxLawKeys {
			p.fault("write a law, such as { exponential: { mean: 1s } }", "%d keys are too many", len(n.Content)/2)
			return false
		}
		kept := make([]*yaml.Node, 0, len(n.Content))
		for i := 0; i+1 < len(n.Content); i += 2 {
			key, value := n.Content[i], n.Content[i+1]
			if !s.keyOK(p, key, kept) {
				return false
			}
			if !s.anyValue(&place{t: s.t, up: p, node: value, name: key.Value}) {
				return false
			}
			kept = append(kept, key, value)
		}
		return true
	case yaml.SequenceNode:
		for i := range n.Content {
			if !s.anyValue(p.item(i)) {
				return false
			}
		}
		return true
	default:
		return s.scalar(p)
	}
}

// scalar checks a single value.
func (s *shaper) scalar(p *place) bool {
	if p.node.ShortTag() == "!!null" {
		p.fault("leave the key out, or give it a value", "has no value")
		return false
	}
	if msg, hint := oddNumber(p.node); msg != "" {
		p.fault(hint, "%s", msg)
		return false
	}
	return true
}

// kindOf names the kind of a node, with its article.
func kindOf(n *yaml.Node) string {
	switch n.Kind {
	case yaml.MappingNode:
		return "a mapping"
	case yaml.SequenceNode:
		return "a list"
	default:
		return "one value"
	}
}

// join makes a path.
func join(path, key string) string {
	if path == "" {
		return key
	}
	return path + "." + key
}
