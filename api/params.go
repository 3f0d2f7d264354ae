package api

import (
	"fmt"
	"net/url"
	"reflect"
	"slices"
	"strconv"
	"strings"
	"unicode"
	"unicode/utf8"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

// maxText is the longest text parameter in bytes.
const maxText = 300

// parameter is one field of a parameter struct. The tags are:
//
//	path:"name" or query:"name"   where it stands
//	doc:"…"                       what it is, for the OpenAPI document
//	min:"1" max:"500"             limits of a whole number
//	default:"50"                  documented; the handler sees this value when none is given
//	enum:"a,b"                    the texts allowed
//	required:"true"               of a query parameter
//
// Fields are string, int, int64 or []string (one text, separated by commas). An
// empty query parameter counts as not given, since forms send those.
type parameter struct {
	in, name, doc, fallback string
	enum                    []string
	required                bool
	min, max                *int64
	index                   []int
	kind                    reflect.Kind
}

// parametersOf reads the fields of a parameter struct, embedded ones included.
func parametersOf(t reflect.Type) []parameter {
	var out []parameter
	for _, f := range reflect.VisibleFields(t) {
		if f.Anonymous {
			continue
		}
		p := parameter{in: "query", name: f.Tag.Get("query"), doc: f.Tag.Get("doc"), fallback: f.Tag.Get("default"),
			required: f.Tag.Get("required") == "true", min: limit(f, "min"), max: limit(f, "max"), index: f.Index, kind: f.Type.Kind()}
		if name := f.Tag.Get("path"); name != "" {
			p.in, p.name, p.required = "path", name, true
		}
		if e := f.Tag.Get("enum"); e != "" {
			p.enum = strings.Split(e, ",")
		}
		out = append(out, p)
	}
	return out
}

func limit(f reflect.StructField, tag string) *int64 {
	n, err := strconv.ParseInt(f.Tag.Get(tag), 10, 64)
	if err != nil {
		return nil
	}
	return &n
}

// readParams fills into, the struct that params describe, from the request.
func readParams(c echo.Context, params []parameter, into reflect.Value) error {
	query, err := queryValues(c, params)
	if err != nil {
		return err
	}
	for i := range params {
		p := &params[i]
		text := query[p.name]
		if p.in == "path" {
			text = pathText(c, p.name)
		}
		if text == "" {
			text = p.fallback
		}
		if text == "" {
			if p.required {
				return invalidParam(p.name, "add "+p.name+"=…", "is needed (%s)", p.doc)
			}
			continue
		}
		if err := p.read(text, into.FieldByIndex(p.index)); err != nil {
			return err
		}
	}
	return nil
}

// queryValues gives the query's parameters, each once. A parameter that the
// address does not have is refused, so that a typing slip is never a filter that
// does nothing.
func queryValues(c echo.Context, params []parameter) (map[string]string, error) {
	var known []string
	for i := range params {
		if params[i].in == "query" {
			known = append(known, params[i].name)
		}
	}
	given, err := url.ParseQuery(c.QueryString())
	if err != nil {
		return nil, fmt.Errorf("query %q: write it percent-encoded: %w", c.QueryString(), analytics.ErrInvalid)
	}
	out := map[string]string{}
	for name, values := range given {
		switch {
		case !slices.Contains(known, name):
			return nil, invalidParam(name, allowed(known), "is not a parameter of this address")
		case len(values) > 1:
			return nil, invalidParam(name, "give it once", "is given %d times", len(values))
		}
		out[name] = values[0]
	}
	return out, nil
}

func allowed(known []string) string {
	if len(known) == 0 {
		return "this address takes none"
	}
	return "use " + strings.Join(known, ", ")
}

func (p *parameter) read(text string, into reflect.Value) error {
	if len(text) > maxText {
		return invalidParam(p.name, fmt.Sprintf("use at most %d", maxText), "has %d bytes", len(text))
	}
	if !utf8.ValidString(text) || strings.ContainsFunc(text, unicode.IsControl) {
		return invalidParam(p.name, "write it in UTF-8 without control characters", "%q is not printable text", text)
	}
	switch p.kind {
	case reflect.Int, reflect.Int64:
		n, err := strconv.ParseInt(text, 10, 64)
		if err != nil {
			return invalidParam(p.name, p.limits(), "%q is not a whole number", text)
		}
		if (p.min != nil && n < *p.min) || (p.max != nil && n > *p.max) {
			return invalidParam(p.name, p.limits(), "%d is out of range", n)
		}
		into.SetInt(n)
	case reflect.Slice:
		into.Set(reflect.ValueOf(strings.Split(text, ",")))
	default:
		if p.enum != nil && !slices.Contains(p.enum, text) {
			return invalidParam(p.name, "use "+strings.Join(p.enum, ", "), "%q is not one of its values", text)
		}
		into.SetString(text)
	}
	return nil
}

// limits says which whole numbers do.
func (p *parameter) limits() string {
	switch {
	case p.min != nil && p.max != nil:
		return fmt.Sprintf("use %d to %d", *p.min, *p.max)
	case p.min != nil:
		return fmt.Sprintf("use %d or more", *p.min)
	case p.max != nil:
		return fmt.Sprintf("use %d or less", *p.max)
	}
	return "use a whole number"
}
