package web

import (
	"fmt"
	"html/template"
	"net/http"
	"time"
)

// Base is what every page has.
type Base struct {
	Title   string // of the browser's tab, before " · Epitally"
	Section string // "wafers", "bins" or "loads"; "" = none
	Search  string // what stands in the search field
	URL     string // path and query that reproduce the page; printed at its foot
	MadeAt  string // when, in the fab's zone; printed at the foot
	Finding Sentence
	Charts  bool // the page has charts
}

// ErrorPage says what was wrong and what to do now.
type ErrorPage struct {
	Base
	Status int
	Detail string
	Remedy string
}

// NewErrorPage makes the page of an HTTP status. detail may be empty.
func NewErrorPage(status int, detail string) ErrorPage {
	p := ErrorPage{Status: status, Detail: detail}
	say := func(what, remedy string) {
		p.Finding, p.Remedy = Sentence{Parts: []Part{{Text: what}}}, remedy
	}
	switch {
	case status == http.StatusNotFound:
		say("There is nothing at this address.", "Check the number for typing slips, or search for a wafer, run or lot above.")
	case status == http.StatusServiceUnavailable:
		say("The database does not answer just now.", "Nothing is lost. Load the page again in a minute; if it stays so, tell whoever runs the server.")
	case status >= http.StatusInternalServerError:
		say("The server could not make this page.", "Nothing is lost. Load the page again; if it stays so, tell whoever runs the server the time and the address of this page.")
	default:
		say("The server cannot answer this address as it is written.", "Go back, or start from the list of wafers.")
	}
	p.Title = fmt.Sprintf("%d %s", status, http.StatusText(status))
	return p
}

// Part is a piece of a sentence.
type Part struct {
	Text   string
	Strong bool   // the finding's numbers and names
	Em     bool   // names of specifications
	Href   string // "" = no link
}

// Sentence is the finding a page begins with.
type Sentence struct {
	Parts []Part
	Basis string // its sample and time, shown on hover and in print; "" = none
}

// Text is the sentence without links and weight.
func (s Sentence) Text() string {
	var b []byte
	for _, p := range s.Parts {
		b = append(b, p.Text...)
	}
	return string(b)
}

// Option is a choice of a form.
type Option struct {
	Value    string
	Label    string
	Selected bool
}

// Fact is a named value, perhaps a link.
type Fact struct {
	Name, Value, Href string
}

// Plate is a word of state; its look follows the word, colour only second.
type Plate struct {
	Word string
}

// Class is the style class of the plate.
func (p Plate) Class() string {
	switch p.Word {
	case "on colour", "stored", "sellable":
		return "plate plate-solid"
	case "long", "refused", "reject":
		return "plate plate-hatched"
	case "short", "unsellable":
		return "plate plate-counter"
	case "mixed", "reading":
		return "plate plate-dotted"
	default:
		return "plate plate-outlined"
	}
}

// Moment writes a time to the minute in the fab's zone: 2026-11-30 23:05 +08:00.
func Moment(t time.Time, zone *time.Location) string {
	if t.IsZero() {
		return noValue
	}
	return t.In(zone).Format("2006-01-02 15:04 -07:00")
}

func templateFuncs() template.FuncMap {
	return template.FuncMap{
		"count":  func(n int) string { return Count(n) },
		"plate":  func(word string) Plate { return Plate{word} },
		"plural": Plural,
		"field":  func(name, label string, options []Option) FilterField { return FilterField{name, label, options} },
	}
}

// Plural writes "1 wafer", "2 wafers"; many is the plural form.
func Plural(n int, one, many string) string {
	if n == 1 {
		return "1 " + one
	}
	return Count(n) + " " + many
}
