// Package api answers HTTP: the JSON, CSV, PNG and binary answers under /api/v1,
// the pages, and the two health checks. It holds no SQL and no formulas: a
// handler parses its parameters, asks the store, computes with analytics and
// answers.
//
// # Invariants
//
//   - One table (routes.go) both registers the handlers of /api/v1 and is what
//     the OpenAPI document is made from, so that the two cannot drift apart. The
//     parameters of a handler are the fields of a struct; its tags are their
//     documentation and their limits. A parameter not in the struct is refused.
//   - Handlers return errors; one function (errors.go) turns them into answers,
//     by one table of error kinds. Answers of 500 and above never tell what went
//     wrong inside; the log does, under the same request id.
//   - What never changes (planes, grids, specification versions) is answered with
//     a strong ETag and may be kept; everything else is asked for again.
package api
