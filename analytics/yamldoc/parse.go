package yamldoc

import (
	"bytes"
	"errors"
	"fmt"

	"github.com/goccy/go-yaml"
	"github.com/goccy/go-yaml/ast"
	"github.com/goccy/go-yaml/lexer"
	"github.com/goccy/go-yaml/parser"
	"github.com/goccy/go-yaml/token"

	"epitally/analytics"
)

// MaxBytes bounds a document.
const MaxBytes = 1 << 20

// maxNesting is far more than a document needs. The parser's time grows with the
// square of the nesting: a megabyte of brackets would take it minutes.
const maxNesting = 64

// Form is what the readers of documents differ in.
type Form struct {
	// Remedy says what to do about several documents in one.
	Remedy string
	// AtKeys places the fault of a mapping at its first key, and that of an
	// unknown key at the key; else at the mapping's sign and at the key's value.
	AtKeys bool
}

// Parse parses a document of one root. The parser's own faults become ours, a
// panic inside it too: bad input never stops the server.
func Parse(document []byte, form Form) (root Node, err error) {
	defer func() {
		if r := recover(); r != nil {
			root, err = Node{}, fault("the document is not readable as YAML")
		}
	}()
	if len(document) > MaxBytes {
		return Node{}, &analytics.Fault{Offset: -1, Problem: fmt.Sprintf("the document is over %d bytes", MaxBytes), Kind: analytics.ErrTooLarge}
	}
	tokens := lexer.Tokenize(string(bytes.TrimPrefix(document, []byte("\xef\xbb\xbf"))))
	if at := tooDeep(tokens); at != nil {
		f := fault(fmt.Sprintf("lists and mappings nest over %d deep", maxNesting))
		f.Line, f.Column = position(at)
		return Node{}, f
	}
	file, err := parser.Parse(tokens, 0, parser.AllowDuplicateMapKey())
	if err != nil {
		f := fault("not YAML: " + err.Error())
		var located yaml.Error
		if errors.As(err, &located) {
			f.Problem = "not YAML: " + located.GetMessage()
			f.Line, f.Column = position(located.GetToken())
		}
		return Node{}, f
	}
	var bodies []ast.Node
	for _, d := range file.Docs {
		if d.Body != nil {
			bodies = append(bodies, d.Body)
		}
	}
	switch len(bodies) {
	case 0:
		return Node{}, fault("the document is empty")
	case 1:
		return Node{Node: bodies[0], atKeys: form.AtKeys}, nil
	}
	f := fault(fmt.Sprintf("%d documents where one is expected", len(bodies)))
	f.Remedy = form.Remedy
	return Node{}, f
}

// fault is one of the document as a whole.
func fault(problem string) *analytics.Fault {
	return &analytics.Fault{Line: 1, Offset: -1, Problem: problem}
}

func position(t *token.Token) (line, column int) {
	if t == nil || t.Position == nil {
		return 0, 0
	}
	return t.Position.Line, t.Position.Column
}

// tooDeep finds the first token that nests deeper than maxNesting: brackets
// anywhere, and the signs of block lists and keys on one line. Block nesting over
// several lines costs its indentation, which MaxBytes bounds.
func tooDeep(tokens token.Tokens) *token.Token {
	brackets, signs, line := 0, 0, 0
	for _, t := range tokens {
		if l, _ := position(t); l != line {
			signs, line = 0, l
		}
		switch t.Type {
		case token.SequenceStartType, token.MappingStartType:
			brackets++
		case token.SequenceEndType, token.MappingEndType:
			brackets = max(0, brackets-1)
		case token.SequenceEntryType, token.MappingKeyType, token.TagType, token.AnchorType:
			signs++
		}
		if brackets > maxNesting || signs > maxNesting {
			return t
		}
	}
	return nil
}
