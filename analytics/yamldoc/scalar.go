package yamldoc

import (
	"math"
	"regexp"
	"slices"
	"strconv"
	"strings"

	"github.com/goccy/go-yaml/ast"
)

// MaxText is the longest text of most documents, in bytes.
const MaxText = 1000

// Scalar reads text of at most [MaxText] as it stands, which may be empty when
// quoted.
func (n Node) Scalar() (string, error) {
	s, err := n.written()
	if err != nil {
		return "", err
	}
	return s, n.checkText(s, MaxText)
}

// Text reads text of at most [MaxText] that is not empty, without the space
// about it.
func (n Node) Text() (string, error) { return n.TextWithin(MaxText) }

// TextWithin is Text of at most limit bytes.
func (n Node) TextWithin(limit int) (string, error) {
	s, err := n.written()
	if err != nil {
		return "", err
	}
	if s = strings.TrimSpace(s); s == "" {
		return "", n.Fault("", "the text is empty")
	}
	return s, n.checkText(s, limit)
}

// written is a scalar as the document writes it.
func (n Node) written() (string, error) {
	switch v := n.Node.(type) {
	case *ast.StringNode:
		return v.Value, nil
	case *ast.LiteralNode:
		return v.Value.Value, nil
	case *ast.IntegerNode, *ast.FloatNode, *ast.BoolNode:
		return n.GetToken().Value, nil
	}
	return "", n.Fault("", "expected text")
}

func (n Node) checkText(s string, limit int) error {
	switch {
	case len(s) > limit:
		return n.Fault("", "the text is over %d bytes", limit)
	case strings.ContainsFunc(s, func(r rune) bool { return r < ' ' && r != '\n' && r != '\t' || r == 0x7f || r == 0xfffd }):
		return n.Fault("", "the text holds control characters")
	}
	return nil
}

// Texts reads a list of at most limit texts, or one text as a list of one.
func (n Node) Texts(limit int) ([]string, error) {
	if _, ok := n.Node.(*ast.SequenceNode); !ok {
		s, err := n.Text()
		return []string{s}, err
	}
	items, err := n.Items(limit)
	if err != nil {
		return nil, err
	}
	var list []string
	for _, i := range items {
		s, err := i.Text()
		if err != nil {
			return nil, err
		}
		list = append(list, s)
	}
	return list, nil
}

// Number reads a finite number.
func (n Node) Number() (float64, error) {
	switch n.Node.(type) {
	case *ast.IntegerNode, *ast.FloatNode:
		v, err := strconv.ParseFloat(n.GetToken().Value, 64)
		if err == nil && !math.IsInf(v, 0) {
			return v, nil
		}
	}
	return 0, n.Fault("", "expected a number")
}

// Whole reads a whole number from low to high.
func (n Node) Whole(low, high int) (int, error) {
	if _, ok := n.Node.(*ast.IntegerNode); ok {
		if v, err := strconv.Atoi(n.GetToken().Value); err == nil && v >= low && v <= high {
			return v, nil
		}
	}
	return 0, n.Fault("", "expected a whole number from %d to %d", low, high)
}

// Truth reads true or false.
func (n Node) Truth() (bool, error) {
	if b, ok := n.Node.(*ast.BoolNode); ok {
		return b.Value, nil
	}
	return false, n.Fault("", "expected true or false")
}

// Choice reads one of a few words.
func (n Node) Choice(words ...string) (string, error) {
	s, err := n.Text()
	if err == nil && !slices.Contains(words, s) {
		return "", n.Fault("use "+strings.Join(words, ", "), "%q is not known here", s)
	}
	return s, err
}

// Pattern reads a regular expression.
func (n Node) Pattern() (*regexp.Regexp, error) {
	s, err := n.Text()
	if err != nil {
		return nil, err
	}
	re, err := regexp.Compile(s)
	if err != nil {
		return nil, n.Fault("", "%q is not a regular expression (%v)", s, err)
	}
	return re, nil
}
