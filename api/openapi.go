package api

import (
	"encoding/json"
	"net/http"
	"reflect"
	"slices"
	"strconv"
	"strings"

	"github.com/labstack/echo/v4"
)

// object is a piece of the OpenAPI document.
type object = map[string]any

// anything is the schema of an answer that is described elsewhere.
type anything struct{}

// openAPI makes the OpenAPI 3 document of the routes.
func openAPI(routes []route) ([]byte, error) {
	schemas := newSchemas()
	paths := object{}
	for _, r := range routes {
		at, ok := paths[r.path].(object)
		if !ok {
			at = object{}
			paths[r.path] = at
		}
		at[strings.ToLower(r.method)] = operation(r, schemas)
	}
	shared := sharedAnswers(schemas)
	if schemas.clash != nil {
		return nil, schemas.clash
	}
	return json.Marshal(object{
		"openapi": "3.0.3",
		"info": object{
			"title": "Epitally", "version": "1",
			"description": "What a fab measured on every die, and which bins the dies fall in. Every list and table is JSON or CSV by the Accept " +
				"header or by format=. Every GET also answers HEAD. Errors are problem details (RFC 9457).",
			"license": object{"name": "Apache-2.0"},
		},
		"servers":    []object{{"url": "/"}},
		"paths":      paths,
		"components": object{"schemas": schemas.components, "responses": shared},
	})
}

func operation(r route, schemas *schemas) object {
	op := object{"operationId": r.id, "summary": r.summary, "responses": responses(r, schemas)}
	params := []object{}
	for i := range r.params {
		params = append(params, r.params[i].describe())
	}
	if len(params) > 0 {
		op["parameters"] = params
	}
	if r.body != nil {
		content, schema, description := object{}, object{"type": "string"}, "a specification document"
		if r.body[0] == mediaBytes {
			schema, description = object{"type": "string", "format": "binary"}, "the file"
		}
		if r.takes != nil {
			schema, description = schemas.of(reflect.TypeOf(r.takes)), "what to work out"
		}
		for _, media := range r.body {
			content[media] = object{"schema": schema}
		}
		op["requestBody"] = object{"required": true, "description": description, "content": content}
	}
	return op
}

// responses are the route's answers of success and the problems it can have.
func responses(r route, schemas *schemas) object {
	out := object{}
	for _, a := range r.answers {
		status := strconv.Itoa(a.status)
		response, ok := out[status].(object)
		if !ok {
			response = object{"description": http.StatusText(a.status), "content": object{}}
			out[status] = response
		}
		schema := object{"type": "string"}
		switch {
		case a.sample != nil:
			schema = schemas.of(reflect.TypeOf(a.sample))
		case !strings.HasPrefix(a.media, "text/") && a.media != mediaYAML:
			schema["format"] = "binary"
		}
		response["content"].(object)[a.media] = object{"schema": schema}
	}
	if r.tagged {
		out["304"] = object{"description": "The reader's copy, named by If-None-Match, is still right"}
	}
	for _, status := range r.problems() {
		out[strconv.Itoa(status)] = object{"$ref": "#/components/responses/" + problemName(status)}
	}
	return out
}

// problems are the statuses of refusals that the route may answer with.
func (r *route) problems() []int {
	out := []int{http.StatusBadRequest, http.StatusInternalServerError, http.StatusServiceUnavailable}
	names := func(p parameter) bool { return p.name == "measurements" }
	if slices.ContainsFunc(r.params, names) || strings.Contains(r.path, "{") || strings.HasSuffix(r.path, ".png") {
		out = append(out, http.StatusNotFound)
	}
	if r.body != nil {
		out = append(out, http.StatusForbidden, http.StatusConflict, http.StatusRequestEntityTooLarge, http.StatusUnsupportedMediaType)
	}
	return out
}

func problemName(status int) string { return strings.ReplaceAll(http.StatusText(status), " ", "") }

func sharedAnswers(schemas *schemas) object {
	out := object{}
	for _, status := range []int{http.StatusBadRequest, http.StatusForbidden, http.StatusNotFound, http.StatusConflict, http.StatusRequestEntityTooLarge,
		http.StatusUnsupportedMediaType, http.StatusInternalServerError, http.StatusServiceUnavailable} {
		out[problemName(status)] = object{"description": http.StatusText(status),
			"content": object{mediaProblem: object{"schema": schemas.of(reflect.TypeFor[problemOut]())}}}
	}
	return out
}

// describe is the parameter as the document has it.
func (p *parameter) describe() object {
	schema := object{"type": "string"}
	switch p.kind {
	case reflect.Int, reflect.Int64:
		schema["type"] = "integer"
		if p.min != nil {
			schema["minimum"] = *p.min
		}
		if p.max != nil {
			schema["maximum"] = *p.max
		}
		if n, err := strconv.ParseInt(p.fallback, 10, 64); err == nil {
			schema["default"] = n
		}
	default:
		schema["maxLength"] = maxText
		if p.fallback != "" {
			schema["default"] = p.fallback
		}
		if p.enum != nil {
			schema["enum"] = p.enum
		}
	}
	out := object{"name": p.name, "in": p.in, "description": p.doc, "schema": schema}
	if p.required {
		out["required"] = true
	}
	if p.in == "query" {
		out["allowEmptyValue"] = true
	}
	return out
}

// describe answers with the document.
func (s *Server) describe(c echo.Context, _ noParams) error {
	if unchanged(c, s.documentTag, askAgain) {
		return notModified(c)
	}
	return c.Blob(http.StatusOK, mediaJSON, s.document)
}
