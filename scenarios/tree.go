package scenarios

import (
	"bytes"
	"errors"
	"fmt"
	"io"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"go.yaml.in/yaml/v3"
)

// Limits on what a file may be, so that no input costs much time or memory.
const (
	maxFile  = 8 << 20 // bytes of a scenario or of a matrix
	maxMarks = 1 << 20 // marks in a scenario that can begin a node
	maxDepth = 24      // levels of mappings and lists
	maxNodes = 1 << 19 // nodes, aliases written out
)

// A tree is a scenario file as YAML nodes, with aliases written out, and the
// options laid over it.
type tree struct {
	file   string
	root   *yaml.Node
	marked map[*yaml.Node]string // nodes that came from an option, and the option
	faults *faults
}

// yamlLine finds the line in a message of the YAML reader.
var yamlLine = regexp.MustCompile(`^line (\d+): `)

// parseTree reads data; it returns nil after a fault that leaves no tree.
func parseTree(file string, data []byte, f *faults) *tree {
	t := &tree{file: file, marked: map[*yaml.Node]string{}, faults: f}
	whole := Pos{File: file}
	if len(data) > maxFile {
		f.add(whole, "", fmt.Sprintf("the file has %d bytes", len(data)), "a scenario has at most 8 MB; put demand into a matrix")
		return nil
	}
	if marks(data) > maxMarks || nested(data) > 1000 {
		f.add(whole, "", "the file has too many or too deeply nested values", "write fewer; put demand into a matrix")
		return nil
	}
	var doc, second yaml.Node
	dec := yaml.NewDecoder(bytes.NewReader(data))
	err := dec.Decode(&doc)
	if err == nil && doc.Kind == yaml.DocumentNode {
		if more := dec.Decode(&second); more == nil {
			f.add(Pos{file, second.Line, second.Column}, "", "a second document begins", "write one scenario a file")
		} else if !errors.Is(more, io.EOF) {
			err = more
		}
	}
	switch {
	case errors.Is(err, io.EOF):
		f.add(whole, "", "the file is empty", "write a scenario")
		return nil
	case err != nil:
		t.syntax(err)
		return nil
	}
	left := maxNodes
	if t.root = t.expand(doc.Content[0], 0, &left, false); t.root == nil {
		return nil
	}
	if t.root.Kind != yaml.MappingNode {
		f.add(t.pos(t.root), "", "the file is not a scenario", "write keys such as \"run:\" and \"sites:\" at the left margin")
		return nil
	}
	return t
}

// marks counts what can begin a node.
func marks(data []byte) int {
	n := 0
	for i, c := range data {
		switch c {
		case ',', ':', '[', '{', '\n', '\r', '?':
			n++
		case '-':
			if i+1 < len(data) && (data[i+1] == ' ' || data[i+1] == '\t') {
				n++
			}
		}
	}
	return n
}

// nested is the greatest number of brackets open at once, of marks of lists
// within lists on one line, and of spaces before a line.
func nested(data []byte) int {
	most, open, dashes, indent, begins := 0, 0, 0, 0, true
	for i, c := range data {
		if begins = begins && c == ' '; begins {
			indent++
		}
		switch c {
		case '[', '{':
			open++
		case ']', '}':
			open = max(0, open-1)
		case '\n':
			dashes, indent, begins = 0, 0, true
		case '-', '?':
			if i+1 < len(data) && data[i+1] == ' ' {
				dashes++
			}
		}
		most = max(most, open, dashes, indent)
	}
	return most
}

// syntax notes an error of the YAML reader.
func (t *tree) syntax(err error) {
	msg := strings.TrimPrefix(err.Error(), "yaml: ")
	pos := Pos{File: t.file}
	if m := yamlLine.FindStringSubmatch(msg); m != nil {
		pos.Line, _ = strconv.Atoi(m[1])
		pos.Col = 1
		msg = msg[len(m[0]):]
	}
	t.faults.add(pos, "", "not YAML: "+msg, "mind indentation, quotes and brackets")
}

// expand returns n with every alias replaced by a copy of what it stands for.
// n itself is changed unless copied says that it stands in such a copy. It
// returns nil after a fault; what contains itself is too deep.
func (t *tree) expand(n *yaml.Node, depth int, left *int, copied bool) *yaml.Node {
	*left--
	if depth > maxDepth {
		t.faults.add(t.pos(n), "", fmt.Sprintf("more than %d levels of nesting", maxDepth), "a scenario needs fewer")
		return nil
	}
	if *left < 0 {
		t.faults.add(t.pos(n), "", fmt.Sprintf("aliases make more than %d values", maxNodes), "write fewer aliases")
		return nil
	}
	if n.Kind == yaml.AliasNode {
		return t.expand(n.Alias, depth+1, left, true)
	}
	if copied {
		c := *n
		c.Content = slices.Clone(n.Content)
		n = &c
	}
	n.Anchor = ""
	n.HeadComment, n.LineComment, n.FootComment = "", "", ""
	for i, c := range n.Content {
		e := t.expand(c, depth+1, left, copied)
		if e == nil {
			return nil
		}
		n.Content[i] = e
	}
	return n
}

// pos is where n stands.
func (t *tree) pos(n *yaml.Node) Pos {
	if option, ok := t.marked[n]; ok {
		return Pos{File: option}
	}
	return Pos{t.file, n.Line, n.Column}
}

// A place is a key in the tree: the node, if the key is there, and how it was
// reached. Its key and position are worked out only for a fault.
type place struct {
	t    *tree
	up   *place
	node *yaml.Node // nil if the key is not there
	name string     // of the key, or "" in a list
	idx  int        // in a list
}

// top is the place of the whole file.
func (t *tree) top() *place { return &place{t: t, node: t.root} }

// field is the place of a key of a mapping, whether it is there or not.
func (p *place) field(name string) *place {
	q := &place{t: p.t, up: p, name: name}
	if p.node != nil && p.node.Kind == yaml.MappingNode {
		if i := find(p.node, name); i >= 0 {
			q.node = p.node.Content[i+1]
		}
	}
	return q
}

// item is the place of an element of a list.
func (p *place) item(i int) *place {
	q := &place{t: p.t, up: p, idx: i}
	if p.node != nil && p.node.Kind == yaml.SequenceNode && i < len(p.node.Content) {
		q.node = p.node.Content[i]
	}
	return q
}

// find is the index of a key in a mapping's content, or -1.
func find(n *yaml.Node, name string) int {
	for i := 0; i+1 < len(n.Content); i += 2 {
		if n.Content[i].Value == name && n.Content[i].Kind == yaml.ScalarNode {
			return i
		}
	}
	return -1
}

// key is the path of p, with elements of lists by their name if they have one.
func (p *place) key() string {
	if p.up == nil {
		return ""
	}
	up := p.up.key()
	if p.name == "" {
		if name := elementName(p.node, p.up.name == "fibres"); name != "" {
			return up + "." + name
		}
		return fmt.Sprintf("%s[%d]", up, p.idx)
	}
	if up == "" {
		return p.name
	}
	return up + "." + p.name
}

// nameOf is the name that a mapping gives itself, or "".
func nameOf(n *yaml.Node) string {
	if n == nil || n.Kind != yaml.MappingNode {
		return ""
	}
	if i := find(n, "name"); i >= 0 && n.Content[i+1].Kind == yaml.ScalarNode {
		return n.Content[i+1].Value
	}
	for _, key := range []string{"circuit", "set-up"} {
		if i := find(n, key); i >= 0 && n.Content[i+1].Kind == yaml.MappingNode {
			return nameOf(n.Content[i+1])
		}
	}
	return ""
}

// pos is where the value of p stands, or else the nearest thing around it.
func (p *place) pos() Pos {
	for q := p; q != nil; q = q.up {
		if q.node != nil {
			return p.t.pos(q.node)
		}
	}
	return Pos{File: p.t.file}
}

// keyPos is where the key of p stands, in a mapping.
func (p *place) keyPos() Pos {
	if p.up != nil && p.name != "" && p.up.node != nil && p.up.node.Kind == yaml.MappingNode {
		if i := find(p.up.node, p.name); i >= 0 {
			return p.t.pos(p.up.node.Content[i])
		}
	}
	return p.pos()
}

// fault notes that the value at p is wrong.
func (p *place) fault(hint, format string, args ...any) {
	p.t.faults.add(p.pos(), p.key(), fmt.Sprintf(format, args...), hint)
}

// given reports whether the key is in the file.
func (p *place) given() bool { return p.node != nil }

// plainInt is a whole number as a scenario writes it.
var plainInt = regexp.MustCompile(`^[-+]?(0|[1-9][0-9]*)$`)

// oddNumber explains a plain scalar that YAML reads as a number though it does
// not look like that number to a person: octal, hexadecimal, underscores, not
// finite.
func oddNumber(n *yaml.Node) (msg, hint string) {
	if n.Style&(yaml.SingleQuotedStyle|yaml.DoubleQuotedStyle) != 0 {
		return "", ""
	}
	switch n.ShortTag() {
	case "!!int":
		if !plainInt.MatchString(n.Value) {
			return fmt.Sprintf("%s is not a plain decimal number", n.Value), "write it without leading zeros, prefixes and underscores"
		}
	case "!!float":
		x, err := strconv.ParseFloat(n.Value, 64)
		if err != nil || math.IsInf(x, 0) || math.IsNaN(x) || strings.Contains(n.Value, "_") {
			return fmt.Sprintf("%s is not a plain decimal number", n.Value), "write digits"
		}
	case "!!timestamp":
		return fmt.Sprintf("%s is read as a date", n.Value), "write it in quotes if it is a name"
	case "!!binary":
		return "binary data is not read", "write text"
	}
	return "", ""
}
