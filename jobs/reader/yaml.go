package reader

import (
	"bytes"
	"errors"
	"fmt"
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/parser"
	"github.com/goccy/go-yaml/token"

	"epitally/analytics"
)

// maxDocument bounds a YAML document in bytes.
const maxDocument = 1 << 20

// node is a YAML node with its key path, for faults that name their place.
type node struct {
	ast.Node
	path string
}

func (n node) fault(remedy, problem string, args ...any) *analytics.Fault {
	f := &analytics.Fault{Offset: -1, Key: n.path, Problem: fmt.Sprintf(problem, args...), Remedy: remedy}
	if n.Node != nil {
		f.Line, f.Column = position(n.GetToken())
	}
	return f
}

// wrap gives an error found in the value of n the place of n.
func (n node) wrap(err error) error {
	var f *analytics.Fault
	if errors.As(err, &f) {
		return n.fault(f.Remedy, "%s", f.Problem)
	}
	return n.fault("", "%s", strings.TrimSuffix(err.Error(), ": "+analytics.ErrInvalid.Error()))
}

func position(t *token.Token) (line, column int) {
	if t == nil || t.Position == nil {
		return 0, 0
	}
	return t.Position.Line, t.Position.Column
}

// maxNesting is far more than a document needs, and keeps the YAML parser's
// recursion and its cost on hostile text small.
const maxNesting = 64

// parseYAML parses a document of one root. The parser's own faults become ours,
// a panic inside it too: bad input never stops the server.
func parseYAML(document []byte) (root node, err error) {
	defer func() {
		if r := recover(); r != nil {
			root, err = node{}, &analytics.Fault{Line: 1, Offset: -1, Problem: "the document is not readable as YAML"}
		}
	}()
	if len(document) > maxDocument {
		return node{}, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the document is over %d bytes", maxDocument), Kind: analytics.ErrTooLarge}
	}
	if deep := nesting(document); deep > maxNesting {
		return node{}, &analytics.Fault{Line: 1, Offset: -1, Problem: fmt.Sprintf("brackets nest over %d deep", maxNesting)}
	}
	file, err := parser.ParseBytes(bytes.TrimPrefix(document, utf8BOM), 0, parser.AllowDuplicateMapKey())
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
	if len(bodies) != 1 {
		return node{}, &analytics.Fault{Line: 1, Offset: -1, Problem: fmt.Sprintf("%d documents where one is expected", len(bodies)), Remedy: "put each into a file of its own"}
	}
	return node{Node: bodies[0]}, nil
}

func nesting(document []byte) (deepest int) {
	deep := 0
	for _, c := range document {
		switch c {
		case '[', '{':
			deep++
			deepest = max(deepest, deep)
		case ']', '}':
			deep = max(0, deep-1)
		}
	}
	return deepest
}

// entry is one key of a mapping with its value.
type entry struct {
	name  string
	value node
}

func (n node) child(key string) string {
	if n.path == "" {
		return key
	}
	return n.path + "." + key
}

// entries reads a mapping in document order; every key stands once and has a value.
func (n node) entries() ([]entry, error) {
	var values []*ast.MappingValueNode
	switch m := n.Node.(type) {
	case *ast.MappingNode:
		values = m.Values
	case *ast.MappingValueNode:
		values = []*ast.MappingValueNode{m}
	default:
		return nil, n.fault("", "expected keys with values")
	}
	var list []entry
	for _, v := range values {
		key := node{Node: v.Key}
		name := v.Key.GetToken().Value
		key.path = n.child(name)
		if slices.ContainsFunc(list, func(e entry) bool { return e.name == name }) {
			return nil, key.fault("", "the key %q stands twice", name)
		}
		if v.Value == nil || v.Value.Type() == ast.NullType {
			return nil, key.fault("write a value, or remove the key", "%q has no value", name)
		}
		list = append(list, entry{name, node{v.Value, key.path}})
	}
	return list, nil
}

// fields reads a mapping with known keys; keys that end in "!" are required.
func (n node) fields(keys ...string) (map[string]node, error) {
	list, err := n.entries()
	if err != nil {
		return nil, err
	}
	found := make(map[string]node, len(list))
	for _, e := range list {
		if !slices.Contains(keys, e.name) && !slices.Contains(keys, e.name+"!") {
			return nil, e.value.fault("use "+strings.ReplaceAll(strings.Join(keys, ", "), "!", ""), "unknown key %q", e.name)
		}
		found[e.name] = e.value
	}
	for _, k := range keys {
		if name, required := strings.CutSuffix(k, "!"); required && !found[name].is() {
			return nil, n.fault("", "the key %q is missing", name)
		}
	}
	return found, nil
}

// is reports whether the key was there.
func (n node) is() bool { return n.Node != nil }

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
		if v == nil {
			return nil, n.fault("", "entry %d is empty", i+1)
		}
		items[i] = node{v, fmt.Sprintf("%s[%d]", n.path, i+1)}
	}
	return items, nil
}

// maxText is the longest scalar of a document, in bytes.
const maxText = 1000

// scalar reads text as it stands, which may be empty when quoted.
func (n node) scalar() (string, error) {
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
	switch {
	case len(s) > maxText:
		return "", n.fault("", "the text is over %d bytes", maxText)
	case strings.ContainsFunc(s, func(r rune) bool { return r < ' ' && r != '\n' && r != '\t' || r == 0x7f || r == 0xfffd }):
		return "", n.fault("", "the text holds control characters")
	}
	return s, nil
}

// text reads text that is not empty.
func (n node) text() (string, error) {
	s, err := n.scalar()
	if s = strings.TrimSpace(s); err == nil && s == "" {
		return "", n.fault("", "the text is empty")
	}
	return s, err
}

// texts reads a list of texts, or one text as a list of one.
func (n node) texts(limit int) ([]string, error) {
	if _, ok := n.Node.(*ast.SequenceNode); !ok {
		s, err := n.text()
		return []string{s}, err
	}
	items, err := n.items(limit)
	if err != nil {
		return nil, err
	}
	var list []string
	for _, i := range items {
		s, err := i.text()
		if err != nil {
			return nil, err
		}
		list = append(list, s)
	}
	return list, nil
}

// number reads a finite number.
func (n node) number() (float64, error) {
	switch n.Node.(type) {
	case *ast.IntegerNode, *ast.FloatNode:
		v, err := strconv.ParseFloat(n.GetToken().Value, 64)
		if err == nil && !math.IsInf(v, 0) {
			return v, nil
		}
	}
	return 0, n.fault("", "expected a number")
}

// whole reads a whole number from low to high.
func (n node) whole(low, high int) (int, error) {
	if _, ok := n.Node.(*ast.IntegerNode); ok {
		if v, err := strconv.Atoi(n.GetToken().Value); err == nil && v >= low && v <= high {
			return v, nil
		}
	}
	return 0, n.fault("", "expected a whole number from %d to %d", low, high)
}

func (n node) truth() (bool, error) {
	if b, ok := n.Node.(*ast.BoolNode); ok {
		return b.Value, nil
	}
	return false, n.fault("", "expected true or false")
}

// choice reads one of a few words.
func (n node) choice(words ...string) (string, error) {
	s, err := n.text()
	if err == nil && !slices.Contains(words, s) {
		return "", n.fault("use "+strings.Join(words, ", "), "%q is not known here", s)
	}
	return s, err
}

func (n node) pattern() (*regexp.Regexp, error) {
	s, err := n.text()
	if err != nil {
		return nil, err
	}
	re, err := regexp.Compile(s)
	if err != nil {
		return nil, n.fault("", "%q is not a regular expression (%v)", s, err)
	}
	return re, nil
}

// value finds one key of a mapping whose other keys are not looked at.
func (n node) value(key string) (node, error) {
	var values []*ast.MappingValueNode
	switch m := n.Node.(type) {
	case *ast.MappingNode:
		values = m.Values
	case *ast.MappingValueNode:
		values = []*ast.MappingValueNode{m}
	}
	for _, v := range values {
		if v.Key.GetToken().Value == key && v.Value != nil {
			return node{v.Value, n.child(key)}, nil
		}
	}
	return node{}, n.fault("", "the key %q is missing", key)
}
