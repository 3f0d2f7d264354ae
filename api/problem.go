package api

import (
	"errors"
	"net/http"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
)

// problemOut is an error answer: problem details of RFC 9457.
type problemOut struct {
	Type      string       `json:"type" doc:"about:blank: the status says what kind of problem it is"`
	Title     string       `json:"title" doc:"the status in words"`
	Status    int          `json:"status"`
	Detail    string       `json:"detail" doc:"what was wrong and what to do now"`
	Instance  string       `json:"instance" doc:"the address asked for"`
	RequestID string       `json:"request_id" doc:"finds the request in the server's log"`
	Errors    []problemErr `json:"errors,omitempty" doc:"where in the input it was"`
}

// problemErr is one located fault of the input.
type problemErr struct {
	Line    int    `json:"line,omitempty" doc:"of the body, from 1"`
	Column  int    `json:"column,omitempty" doc:"in bytes, from 1"`
	Key     string `json:"key,omitempty" doc:"path of keys in the body, or the parameter's name"`
	Problem string `json:"problem"`
	Remedy  string `json:"remedy,omitempty"`
}

const mediaProblem = "application/problem+json"

func (s *Server) problemOf(err error, c echo.Context) problemOut {
	status := statusOf(err)
	p := problemOut{Type: "about:blank", Title: http.StatusText(status), Status: status, Detail: detailOf(err, status, c),
		Instance: c.Request().URL.RequestURI(), RequestID: requestID(c)}
	var f *analytics.Fault
	if errors.As(err, &f) && status < http.StatusInternalServerError {
		p.Errors = []problemErr{{Line: f.Line, Column: f.Column, Key: f.Key, Problem: f.Problem, Remedy: f.Remedy}}
	}
	return p
}
