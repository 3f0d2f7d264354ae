package reader

import (
	"bytes"
	"context"
	"errors"

	"epitally/analytics/quantity"
	"epitally/analytics/wafermap"
)

const runSheetMark = "# epitally: run sheet"
const (
	formatDelimited = "delimited"
	formatSTDF      = "stdf"
)

type Profile struct {
	Name   string
	format string
}

func (p *Profile) matches(string) bool                           { return false }
func ParseProfile(doc []byte) (Profile, error)                   { return Profile{}, errors.New("not built yet") }
func isSTDF(b []byte) bool                                       { return len(b) > 5 && b[2] == 0 && b[3] == 10 }
func documentKind(b []byte) (string, string)                     { return "", "" }
func (j *job) readSTDF(context.Context) error                    { return errors.New("not built yet") }
func (j *job) readRunSheet(context.Context) error                { return errors.New("not built yet") }
func (j *job) readDocument(_ context.Context, k, n string) error { return errors.New("not built yet") }
func (j *job) readDelimited(context.Context, *Profile) error     { return errors.New("not built yet") }

var _ = bytes.Equal

type Catalogue struct {
	Products   []CatalogueProduct
	Recipes    []CatalogueRecipe
	Quantities []quantity.Quantity
}
type CatalogueProduct struct {
	Name   string
	Layout wafermap.Layout
}
type CatalogueRecipe struct {
	Name    string
	Targets []CatalogueTarget
}
type CatalogueTarget struct {
	Quantity      string
	Value, Window float64
}

func ParseCatalogue(doc []byte) (Catalogue, error) { return Catalogue{}, errors.New("not built yet") }
