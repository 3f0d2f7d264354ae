// Package yamldoc reads the YAML documents that people write for Epitally:
// specifications, catalogues and reading profiles. It gives the document as
// nodes that know their line, column and key path, so that everything found
// wrong in one is an *analytics.Fault at its place.
//
// A document is one root of at most [MaxBytes]. Every key of a mapping stands
// once and has a value; anchors and aliases are not read. Text that would keep
// the YAML parser busy by its nesting is refused before it is parsed.
package yamldoc
