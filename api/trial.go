package api

import (
	"net/http"

	"github.com/labstack/echo/v4"

	"epitally/analytics/binning"
	"epitally/db"
)

type trialParams struct {
	Measurements []string `query:"measurements" doc:"numbers of the measurements to try it on, separated by commas; else the last ones it is for"`
	Last         int      `query:"last" min:"1" max:"500" default:"20" doc:"how many of the last wafers, where none are named"`
	Lot          string   `query:"lot" doc:"only wafers of this lot, where none are named"`
	Risks        string   `query:"risks" enum:"yes,no" default:"yes" doc:"work out what the uncertainty of measurement does to every bin"`
}

// trialOut is a specification tried on wafers, with what is likely to be a mistake
// in it.
type trialOut struct {
	Spec        string         `json:"specification"`
	Wafers      int            `json:"wafers"`
	Good        int            `json:"good" doc:"dies in sellable bins"`
	Denominator int            `json:"denominator" doc:"dies the yield is over"`
	Value       float64        `json:"value" doc:"what the sellable dies bring, where bins have prices"`
	Currency    string         `json:"currency"`
	RiskWafers  int            `json:"risk_wafers" doc:"wafers that the risks are worked out over; 0: none were"`
	Cells       []trialCellOut `json:"cells"`
	Findings    []findingOut   `json:"findings"`
}

type trialCellOut struct {
	Name  string   `json:"name"`
	Class string   `json:"class" doc:"sellable, unsellable, reject or untested"`
	Dies  int      `json:"dies"`
	Price *float64 `json:"price" doc:"of one die; null for rejects"`
	// Shares of the bin's dies.
	WronglyAccepted *float64 `json:"wrongly_accepted" doc:"expected share of the bin's dies that truly lie outside it (JCGM 106:2012); null: not worked out"`
	WronglyRejected *float64 `json:"wrongly_rejected" doc:"expected dies elsewhere that truly lie in the bin, as a share of the bin's dies"`
	Confident       *float64 `json:"confident" doc:"share of the bin's dies that conform with 95 % confidence"`
}

// findingOut is binning.Finding.
type findingOut struct {
	Kind  string   `json:"kind" doc:"overlap, gap, near corner, unreachable, too fine, outside locus or empty"`
	Says  string   `json:"says"`
	Cells []string `json:"cells"`
	Area  float64  `json:"area" doc:"in the region's plane; 0: not of an area"`
	Dies  int      `json:"dies" doc:"that it hits"`
	Line  int      `json:"line" doc:"of the document; 0: the whole"`
}

func wireFinding(f binning.Finding) findingOut {
	return findingOut{string(f.Kind), f.Says, full(f.Cells), f.Area, f.Dies, f.Line}
}

// trySpec tries the specification of the body, which is not stored.
func (s *Server) trySpec(c echo.Context, p trialParams) error {
	document, err := readDocument(c)
	if err != nil {
		return err
	}
	spec, err := binning.Parse(document)
	if err != nil {
		return err
	}
	ctx := c.Request().Context()
	list, err := s.choose(ctx, spec, p.Measurements, p.Lot, p.Last)
	if err != nil {
		return err
	}
	t, err := s.store.Try(ctx, spec, list, p.Risks == "yes")
	if err != nil {
		return err
	}
	found, _, err := s.store.Findings(ctx, t, list)
	if err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, wireTrial(t, found))
}

func wireTrial(t *db.Trial, found []binning.Finding) trialOut {
	out := trialOut{Spec: t.Spec.Name, Wafers: t.Wafers, Good: t.Good(), Denominator: t.Denominator, Value: t.Value(), Currency: t.Spec.Currency,
		Cells: make([]trialCellOut, len(t.Counts)), Findings: mapped(found, wireFinding)}
	if t.Risk != nil {
		out.RiskWafers = t.Risk.Wafers
	}
	for i, cell := range t.Spec.Cells() {
		o := trialCellOut{Name: cell.Name, Class: cell.Class.String(), Dies: t.Counts[i]}
		if i < t.Spec.Bins() {
			o.Price = &cell.Price
			if t.Risk != nil && t.Risk.Counts[i] > 0 {
				n := float64(t.Risk.Counts[i])
				accepted, rejected, confident := t.Risk.WronglyAccepted[i]/n, t.Risk.WronglyRejected[i]/n, float64(t.Risk.Confident[i])/n
				o.WronglyAccepted, o.WronglyRejected, o.Confident = &accepted, &rejected, &confident
			}
		}
		out.Cells[i] = o
	}
	return out
}
