// Package web holds everything a browser sees: the templates, styles and
// scripts, the builders of chart options, and the painting of map pictures.
//
// # Invariants
//
// Pages are typed structs that embed Base; they are rendered to memory and then
// written, so that a reader never gets half a page. No page carries inline
// script or style attributes: data for scripts stands in JSON blocks, which
// html/template escapes. Every page works without script, save the map, which
// then is the server's own picture.
//
// Colour tables (scale.go) are made here once and handed to the scripts, so that
// the canvas, the pictures and the charts agree.
//
// The package knows nothing of the database and of HTTP routes beyond the URLs
// that its links lead to.
package web
