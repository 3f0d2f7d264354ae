package web

// BinsPage lists the specifications.
type BinsPage struct {
	Base
	Specs []SpecLine
}

// SpecLine is one specification of the list.
type SpecLine struct {
	Name, Href string
	Title      string
	Version    int
	Kind       string
	Products   string
	StoredAt   string
	Yield      string // of the last wafers together: "71 %"
	YieldOver  string // "141,000 of 198,000 dies of the last 20 wafers"
}

// BinPage shows one version of a specification.
type BinPage struct {
	Base
	Name     string
	Version  int
	Facts    []Fact
	Versions []Fact // links to the versions, newest first
	Bins     []SpecCell
	Rejects  []SpecCell
	Axes     []SpecAxis
	Needs    []Fact // quantities the spec needs, with units
	Document string
	Problem  string // why the document cannot be read now; "" = it can
	Yields   *Chart
}

// SpecCell is a bin or reject reason in words.
type SpecCell struct {
	Name, Class string
}

// SpecAxis is one axis of a specification with its edges in words.
type SpecAxis struct {
	Label, Unit, Edges string
}
