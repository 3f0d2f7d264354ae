package web

import "net/url"

// WafersPage lists wafers, newest measurement first.
type WafersPage struct {
	Base
	Fields   []FilterField // the filter form, in order
	Filtered bool          // any filter is set
	Quantity string        // what the small maps show, in words
	Rows     []WaferLine
	Total    int    // wafers the filter selects
	OlderURL string // "" at the end
	FirstURL string // "" on the first page
	Empty    bool   // nothing has ever been loaded
	Drop     string // the drop folder, said on the empty page; "" = not known
}

// FilterField is one selector of the filter form.
type FilterField struct {
	Name    string // query parameter
	Label   string
	Options []Option // the first means "any"
}

// WaferLine is one row of the wafers list. Numbers come formatted, since units
// and decimals differ from row to row; "–" says that there is none.
type WaferLine struct {
	Wafer, Href       string
	Lot, LotHref      string
	Grown, GrownHref  string // "Heron 204, pocket 7"
	Product           string
	Kind              string
	MeasuredAt        string
	MapLight, MapDark string // URLs of the small map; "" = none
	MapAlt            string
	Quantity          string // "dominant wavelength"
	Off               string // median deviation from target with unit, or the median where there is no target
	OffIsMedian       bool   // true: no target is known, Off is the median itself
	SD                string // with unit
	N                 string // values the figures rest on
	State             string
	Yield             string // "71 %"
	YieldOver         string // "of 14,516 layout dies"
	Spec, SpecHref    string
}

// WafersFound is what the first sentence of the wafers list rests on.
type WafersFound struct {
	Total    int            // wafers the filter selects
	ByState  map[string]int // of them, by colour state word
	Filtered bool
	Link     func(state string) string // URL of the list narrowed to a state
	AllURL   string
	Basis    string
}

// stateOrder is the order in which states are told.
var stateOrder = []string{"on colour", "long", "short", "mixed", "held", "unmeasured"}

// WafersSentence tells how many wafers there are and how they stand.
func WafersSentence(f WafersFound) Sentence {
	if f.Total == 0 && f.Filtered {
		return Sentence{Basis: f.Basis, Parts: []Part{
			{Text: "No wafer", Strong: true}, {Text: " fits this filter; "},
			{Text: "show all wafers", Href: f.AllURL}, {Text: "."}}}
	}
	if f.Total == 0 {
		return Sentence{Basis: f.Basis, Parts: []Part{
			{Text: "No wafer is stored yet", Strong: true}, {Text: ", so nothing can be said of colour or yield."}}}
	}
	s := Sentence{Basis: f.Basis, Parts: []Part{{Text: Count(f.Total), Strong: true}}}
	s.say(map[bool]string{true: " wafer", false: " wafers"}[f.Total == 1])
	if f.Filtered {
		s.say(map[bool]string{true: " fits this filter", false: " fit this filter"}[f.Total == 1])
	}
	lead, known := ": ", 0
	for _, state := range stateOrder {
		n := f.ByState[state]
		if n == 0 {
			continue
		}
		s.say(lead)
		s.Parts = append(s.Parts, Part{Text: Count(n) + " " + state, Strong: known == 0, Href: f.Link(state)})
		lead, known = ", ", known+n
	}
	if rest := f.Total - known; rest > 0 {
		if known == 0 {
			s.say("; whether they are on colour cannot be told, since no target is known for them")
		} else {
			s.say("; of " + Count(rest) + " it cannot be told, since no target is known for them")
		}
	}
	s.say(".")
	return s
}

// say appends plain text.
func (s *Sentence) say(text string) { s.Parts = append(s.Parts, Part{Text: text}) }

// stress appends text in strong type, a link when href is not empty.
func (s *Sentence) stress(text, href string) {
	s.Parts = append(s.Parts, Part{Text: text, Strong: true, Href: href})
}

// waferHref is the address of a wafer's page.
func waferHref(wafer string) string { return "/wafers/" + url.PathEscape(wafer) }
