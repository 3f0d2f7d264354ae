package yamldoc

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"github.com/goccy/go-yaml/ast"

	"epitally/analytics"
)

// Node is a YAML node with its key path. The zero Node is a key that is absent.
type Node struct {
	ast.Node
	path   string
	atKeys bool
}

// Entry is one key of a mapping with its value.
type Entry struct {
	Name  string
	Value Node
	key   Node
}

// Is reports whether the key was there.
func (n Node) Is() bool { return n.Node != nil }

// Line is the line the node stands in, from 1; 0 = absent.
func (n Node) Line() int {
	if n.Node == nil {
		return 0
	}
	line, _ := position(n.GetToken())
	return line
}

// Fault locates a problem at the node.
func (n Node) Fault(remedy, problem string, args ...any) *analytics.Fault {
	f := &analytics.Fault{Offset: -1, Key: n.path, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
	if n.Node != nil {
		at := n.Node
		if m, ok := at.(*ast.MappingNode); ok && n.atKeys && len(m.Values) > 0 {
			at = m.Values[0].Key
		}
		f.Line, f.Column = position(at.GetToken())
	}
	return f
}

// Wrap gives an error found in the value of n the place of n.
func (n Node) Wrap(err error) error {
	var f *analytics.Fault
	if errors.As(err, &f) {
		return n.Fault(f.Remedy, "%s", f.Problem)
	}
	return n.Fault("", "%s", strings.TrimSuffix(err.Error(), ": "+analytics.ErrInvalid.Error()))
}

// child is the node of a key or value under key.
func (n Node) child(key string, at ast.Node) Node {
	path := key
	if n.path != "" {
		path = n.path + "." + key
	}
	return Node{at, path, n.atKeys}
}

// pairs are a mapping's keys and values; ok is false for other nodes.
func (n Node) pairs() (values []*ast.MappingValueNode, ok bool) {
	switch m := n.Node.(type) {
	case *ast.MappingNode:
		return m.Values, true
	case *ast.MappingValueNode:
		return []*ast.MappingValueNode{m}, true
	}
	return nil, false
}

// Entries reads a mapping in document order; every key stands once and has a value.
func (n Node) Entries() ([]Entry, error) {
	values, ok := n.pairs()
	if !ok {
		return nil, n.Fault("", "expected keys with values")
	}
	list := make([]Entry, 0, len(values))
	seen := make(map[string]bool, len(values))
	for _, v := range values {
		name := v.Key.GetToken().Value
		key := n.child(name, v.Key)
		if seen[name] {
			return nil, key.Fault("", "the key %q stands twice", name)
		}
		seen[name] = true
		if v.Value == nil || v.Value.Type() == ast.NullType {
			return nil, key.Fault("write a value, or remove the key", "%q has no value", name)
		}
		list = append(list, Entry{name, n.child(name, v.Value), key})
	}
	return list, nil
}

// Fields reads a mapping with known keys; keys that end in "!" are required.
func (n Node) Fields(keys ...string) (map[string]Node, error) {
	list, err := n.Entries()
	if err != nil {
		return nil, err
	}
	found := make(map[string]Node, len(list))
	for _, e := range list {
		if !slices.Contains(keys, e.Name) && !slices.Contains(keys, e.Name+"!") {
			at := e.Value
			if n.atKeys {
				at = e.key
			}
			return nil, at.Fault("use "+strings.ReplaceAll(strings.Join(keys, ", "), "!", ""), "unknown key %q", e.Name)
		}
		found[e.Name] = e.Value
	}
	for _, k := range keys {
		if name, required := strings.CutSuffix(k, "!"); required && !found[name].Is() {
			return nil, n.Fault("", "the key %q is missing", name)
		}
	}
	return found, nil
}

// Value finds one key of a mapping whose other keys are not looked at.
func (n Node) Value(key string) (Node, error) {
	values, _ := n.pairs()
	for _, v := range values {
		if v.Key.GetToken().Value == key && v.Value != nil {
			return n.child(key, v.Value), nil
		}
	}
	return Node{}, n.Fault("", "the key %q is missing", key)
}

// Items reads a list of at most limit entries.
func (n Node) Items(limit int) ([]Node, error) {
	list, ok := n.Node.(*ast.SequenceNode)
	if !ok {
		return nil, n.Fault("", "expected a list")
	}
	if len(list.Values) > limit {
		return nil, n.Fault("", "%d entries where at most %d are read", len(list.Values), limit)
	}
	items := make([]Node, len(list.Values))
	for i, v := range list.Values {
		if v == nil {
			return nil, n.Fault("", "entry %d is empty", i+1)
		}
		items[i] = Node{v, fmt.Sprintf("%s[%d]", n.path, i+1), n.atKeys}
	}
	return items, nil
}
