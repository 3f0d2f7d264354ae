package binning

import (
	"errors"
	"fmt"
	"slices"
	"strings"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/parser"
	"github.com/goccy/go-yaml/token"

	"epitally/analytics"
)

// maxDocument bounds a specification document in bytes.
const maxDocument = 1 << 20

// node is a YAML node with its key path, for faults that name their place.
type node struct {
	ast.Node
	path string
}

// fault locates a problem at the node.
func (n node) fault(remedy, problem string, args ...any) *analytics.Fault {
	f := &analytics.Fault{Offset: -1, Key: n.path, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
	if n.Node != nil {
		at := n.Node
		if m, ok := at.(*ast.MappingNode); ok && len(m.Values) > 0 {
			at = m.Values[0].Key // a mapping begins at its first key
		}
		f.Line, f.Column = position(at.GetToken())
	}
	return f
}

func position(t *token.Token) (line, column int) {
	if t == nil || t.Position == nil {
		return 0, 0
	}
	return t.Position.Line, t.Position.Column
}

// readDocument parses YAML to its root. The parser's own faults become ours, a
// panic inside it too: bad input never stops the server.
func readDocument(document []byte) (root node, err error) {
	defer func() {
		if r := recover(); r != nil {
			err = &analytics.Fault{Line: 1, Offset: -1, Problem: "the document is not readable as YAML"}
		}
	}()
	if len(document) > maxDocument {
		return node{}, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the document is over %d bytes", maxDocument), Kind: analytics.ErrTooLarge}
	}
	file, err := parser.ParseBytes(document, 0, parser.AllowDuplicateMapKey())
	if err != nil {
		f := &analytics.Fault{Line: 1, Offset: -1, Problem: "not YAML: " + err.Error()}
		var located yaml.Error
		if errors.As(err, &located) {
			f.Problem = "not YAML: " + located.GetMessage()
			f.Line, f.Column = position(located.GetToken())
		}
		return node{}, f
	}
	var bodies []ast.Node
	for _, d := range file.Docs {
		if d.Body != nil {
			bodies = append(bodies, d.Body)
		}
	}
	if len(bodies) == 0 {
		return node{}, &analytics.Fault{Line: 1, Offset: -1, Problem: "the document is empty"}
	}
	if len(bodies) > 1 {
		return node{}, &analytics.Fault{Line: 1, Offset: -1, Problem: fmt.Sprintf("%d documents where one is expected", len(bodies)),
			Remedy: "write one specification per document"}
	}
	return node{Node: bodies[0]}, nil
}

// fields reads a mapping with known keys; keys that end in "!" are required.
func (n node) fields(keys ...string) (map[string]node, error) {
	var values []*ast.MappingValueNode
	switch m := n.Node.(type) {
	case *ast.MappingNode:
		values = m.Values
	case *ast.MappingValueNode:
		values = []*ast.MappingValueNode{m}
	default:
		return nil, n.fault("", "expected keys with values")
	}
	found := make(map[string]node, len(values))
	for _, v := range values {
		key := node{Node: v.Key}
		name := v.Key.GetToken().Value
		key.path = n.child(name)
		if !slices.Contains(keys, name) && !slices.Contains(keys, name+"!") {
			return nil, key.fault("use "+strings.ReplaceAll(strings.Join(keys, ", "), "!", ""), "unknown key %q", name)
		}
		if _, twice := found[name]; twice {
			return nil, key.fault("", "the key %q stands twice", name)
		}
		if v.Value == nil || v.Value.Type() == ast.NullType {
			return nil, key.fault("", "%q has no value", name)
		}
		found[name] = node{v.Value, key.path}
	}
	for _, k := range keys {
		if name, required := strings.CutSuffix(k, "!"); required && found[name].Node == nil {
			return nil, n.fault("", "the key %q is missing", name)
		}
	}
	return found, nil
}

func (n node) child(key string) string {
	if n.path == "" {
		return key
	}
	return n.path + "." + key
}

// items reads a list.
func (n node) items(limit int) ([]node, error) {
	list, ok := n.Node.(*ast.SequenceNode)
	if !ok {
		return nil, n.fault("", "expected a list")
	}
	if len(list.Values) > limit {
		return nil, n.fault("", "%d entries where at most %d are read", len(list.Values), limit)
	}
	items := make([]node, len(list.Values))
	for i, v := range list.Values {
		items[i] = node{v, fmt.Sprintf("%s[%d]", n.path, i+1)}
		if v == nil {
			return nil, n.fault("", "entry %d is empty", i+1)
		}
	}
	return items, nil
}

// text reads a scalar that is not empty, at most limit bytes.
func (n node) text(limit int) (string, error) {
	var s string
	switch v := n.Node.(type) {
	case *ast.StringNode:
		s = v.Value
	case *ast.LiteralNode:
		s = v.Value.Value
	case *ast.IntegerNode, *ast.FloatNode, *ast.BoolNode:
		s = n.GetToken().Value
	default:
		return "", n.fault("", "expected text")
	}
	s = strings.TrimSpace(s)
	switch {
	case s == "":
		return "", n.fault("", "the text is empty")
	case len(s) > limit:
		return "", n.fault("", "the text is over %d bytes", limit)
	case strings.ContainsFunc(s, func(r rune) bool { return r < ' ' && r != '\n' && r != '\t' || r == 0x7f || r == 0xfffd }):
		return "", n.fault("", "the text holds control characters")
	}
	return s, nil
}
