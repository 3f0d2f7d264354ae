package reader

import (
	"epitally/analytics/colour"
	"epitally/analytics/yamldoc"
)

// addStation reads the standard uncertainties of a station's readings.
func (c *Catalogue) addStation(n yamldoc.Node) (named yamldoc.Node, name string, err error) {
	f, err := n.Fields("station!", "uncertainty!")
	if err != nil {
		return n, "", err
	}
	s := CatalogueStation{Uncertainty: map[string]float64{}}
	if s.Name, err = nameIn(f["station"]); err != nil {
		return n, "", err
	}
	entries, err := f["uncertainty"].Entries()
	if err != nil {
		return n, "", err
	}
	for _, e := range entries {
		if !c.knows(e.Name) {
			return n, "", e.Value.Fault("use a built-in quantity, or declare it under quantities", "the quantity %q is not known", e.Name)
		}
		u, err := e.Value.Number()
		if err != nil {
			return n, "", err
		}
		if !(u > 0) {
			return n, "", e.Value.Fault("state the standard uncertainty (one sigma) of one reading, in the quantity's unit", "%g is not above zero", u)
		}
		s.Uncertainty[e.Name] = u
	}
	c.Stations = append(c.Stations, s)
	return f["station"], s.Name, nil
}

// colourIn reads how a recipe's dominant wavelength follows from its peak: a line
// model by name, or a relation that was fitted to dies measured both ways.
func colourIn(n yamldoc.Node) (*colour.PeakModel, error) {
	f, err := n.Fields("model", "ratio", "short_tail", "long_tail", "reference_nm", "offset_nm", "slope", "residual_nm", "fitted_to")
	if err != nil {
		return nil, err
	}
	m := &colour.PeakModel{}
	for key, to := range map[string]*string{"model": &m.Model, "fitted_to": &m.FittedTo} {
		if at, ok := f[key]; ok {
			if *to, err = at.Text(); err != nil {
				return nil, err
			}
		}
	}
	for key, to := range map[string]*float64{"ratio": &m.Ratio, "short_tail": &m.ShortTail, "long_tail": &m.LongTail, "reference_nm": &m.ReferenceNM, "offset_nm": &m.OffsetNM, "slope": &m.Slope, "residual_nm": &m.ResidualNM} {
		if at, ok := f[key]; ok {
			if *to, err = at.Number(); err != nil {
				return nil, err
			}
		}
	}
	if err := m.Check(); err != nil {
		return nil, n.Wrap(err)
	}
	return m, nil
}
