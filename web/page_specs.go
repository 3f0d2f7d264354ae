package web

import (
	"fmt"
	"math"

	"epitally/analytics/binning"
)

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
	Versions []VersionLine // newest first
	Rejects  []SpecCell
	Needs    []Fact // quantities the spec needs, with units
	Document string
	Problem  string // why the document cannot be read now; "" = it can
	Yields   *Chart

	Look   SpecLook
	Last   []Option // how many wafers are looked at
	Lot    string   // of which lot; "" = of any
	Views  []Option // of chromaticities
	Editor *SpecEditor
}

// VersionLine is one version of a specification.
type VersionLine struct {
	Name, Href               string
	StoredAt, Author, Reason string
}

// SpecLook is what a specification does to the dies of some wafers.
type SpecLook struct {
	Wafers   string // "the last 20 wafers"
	None     bool   // there are no wafers to look at
	Plots    []BinPlot
	Bins     BinTable
	Findings []SpecFinding
	Verdict  Sentence // yield now, and before a change
	Good     int
	Total    int
}

// SpecEditor is where a specification is changed.
type SpecEditor struct {
	Try          string // address that an edited document is tried at
	Publish      string // address that it is stored at
	Measurements string // numbers of the measurements it is tried on
	Next         int    // the version it would become
}

// SpecFinding is something about a specification to look at.
type SpecFinding struct {
	Kind, Says string
	Line       int
	Dies       string // that it hits; "" = none, or not counted
}

// SpecCell is a reject reason in words.
type SpecCell struct {
	Name, Class string
}

// BinTable is dies per bin, as measured and with confidence.
type BinTable struct {
	Rows    []BinRow
	Risks   bool   // the columns of risk have values
	Priced  string // currency; "" = bins have no prices
	Caption string
}

// BinRow is one bin.
type BinRow struct {
	Name, Class              string
	Dies, Share              string
	Confident                string // dies, scaled from the wafers that risks were worked out over
	WrongAccept, WrongReject string // shares
	Price, Value             string
}

// BinNumbers is what a table of bins is made from.
type BinNumbers struct {
	Spec        *binning.Spec
	Counts      []int // dies per code
	Denominator int
	// Risk is over RiskCounts, dies per code of RiskWafers wafers; nil = none.
	Risk       *binning.Conformity
	RiskCounts []int
	RiskWafers int
	Wafers     int
}

// NewBinTable makes the table of all bins, fullest first within their order.
func NewBinTable(n BinNumbers) BinTable {
	t := BinTable{Risks: n.Risk != nil, Priced: n.Spec.Currency}
	cells := n.Spec.Cells()
	for i, c := range cells {
		if c.Price > 0 && t.Priced == "" {
			t.Priced = "price"
		}
		row := BinRow{Name: c.Name, Class: c.Class.String(), Dies: Count(n.Counts[i]), Share: Percent(n.Counts[i], n.Denominator),
			Confident: noValue, WrongAccept: noValue, WrongReject: noValue, Price: noValue, Value: noValue}
		if i >= n.Spec.Bins() {
			row.Confident, row.WrongAccept, row.WrongReject, row.Price, row.Value = "", "", "", "", ""
		} else {
			if c.Price > 0 {
				row.Price, row.Value = Number(c.Price, 4), Number(c.Price*float64(n.Counts[i]), 0)
			}
			if n.Risk != nil && n.RiskCounts[i] > 0 {
				of := float64(n.RiskCounts[i])
				row.Confident = Count(int(math.Round(float64(n.Risk.Confident[i]) / of * float64(n.Counts[i]))))
				row.WrongAccept = smallShare(n.Risk.WronglyAccepted[i] / of)
				row.WrongReject = smallShare(n.Risk.WronglyRejected[i] / of)
			}
		}
		t.Rows = append(t.Rows, row)
	}
	t.Caption = fmt.Sprintf("Shares are of %s dies on the layouts of %s.", Count(n.Denominator), Plural(n.Wafers, "wafer", "wafers"))
	if n.Risk != nil {
		t.Caption += " A die counts with 95 % confidence when the probability that its true values lie in its bin is at least 0.95. " +
			"Wrongly accepted are dies of a bin expected to lie truly outside it; wrongly rejected are dies elsewhere expected to lie truly in it; both as shares of the bin's dies (JCGM 106:2012, prior uninformative, errors independent)."
		if n.RiskWafers < n.Wafers {
			t.Caption += fmt.Sprintf(" Worked out over %d of the wafers, evenly chosen.", n.RiskWafers)
		}
	}
	return t
}

// ConfidentShare is the share of all dies that are in sellable bins and conform
// with 95 % confidence; NaN when risks were not worked out.
func (n BinNumbers) ConfidentShare() float64 {
	if n.Risk == nil || n.Denominator == 0 {
		return math.NaN()
	}
	sum := 0.0
	for i, c := range n.Spec.Cells()[:n.Spec.Bins()] {
		if c.Class == binning.Sellable && n.RiskCounts[i] > 0 {
			sum += float64(n.Risk.Confident[i]) / float64(n.RiskCounts[i]) * float64(n.Counts[i])
		}
	}
	return sum / float64(n.Denominator)
}

// smallShare writes a share that may be far below a percent.
func smallShare(v float64) string {
	switch {
	case v < 0.00005:
		return "0" + thinSpace + "%"
	case v < 0.01:
		return Number(100*v, 2) + thinSpace + "%"
	}
	return Number(100*v, 1) + thinSpace + "%"
}

// TrialSentence tells what a specification yields on the wafers looked at, and
// against before dies, what a change does; before < 0 = nothing was changed.
// confident is the share of all dies that sell and conform with 95 % confidence,
// NaN when it was not worked out.
func TrialSentence(good, total, before int, confident float64, wafers string) Sentence {
	var s Sentence
	if total == 0 {
		s.say("There are no measured wafers for it, so what it yields cannot be told.")
		return s
	}
	s.say("On " + wafers + " ")
	s.stress(Count(good)+" of "+Count(total)+" dies", "")
	s.say(" sell, ")
	s.stress(shareText(good, total), "")
	if !math.IsNaN(confident) {
		s.say(", and " + Number(100*confident, 1) + thinSpace + "% conform with 95" + thinSpace + "% confidence")
	}
	if before >= 0 {
		s.say("; before the change " + shareText(before, total) + ", so ")
		s.stress(Signed(float64(good-before), 0)+" dies", "")
	}
	s.say(".")
	return s
}

func shareText(n, total int) string {
	return Number(100*float64(n)/float64(total), 2) + thinSpace + "%"
}
