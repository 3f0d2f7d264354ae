package simfab

import (
	"sort"

	"epitally/analytics/colour"
)

// hue is the chromaticity of a recipe's dies over their dominant wavelength: that
// of a line as measured LEDs of the colour have it, at the recipe's width.
type hue struct {
	dominantNM, x, y []float64 // ascending
}

// newHue samples the line about the recipe's peak.
func newHue(r *Recipe) *hue {
	h := &hue{}
	centre := r.optics.offsetAt
	line := colour.DefaultLineModel(centre)
	for peak := centre - 25; peak <= centre+25; peak++ {
		s, err := line.Spectrum(peak, r.optics.fwhmNM)
		if err != nil {
			continue // outside what lines are modelled for: the scenario has none
		}
		p := s.XYZ().XY()
		if d, err := colour.DominantOf(p, colour.WhiteE); err == nil {
			h.dominantNM, h.x, h.y = append(h.dominantNM, d.WavelengthNM), append(h.x, p.X), append(h.y, p.Y)
		}
	}
	return h
}

// at is the chromaticity of a die, linear between samples 1 nm apart.
func (h *hue) at(dominantNM float64) (x, y float64) {
	i := min(max(1, sort.SearchFloat64s(h.dominantNM, dominantNM)), len(h.dominantNM)-1)
	t := (dominantNM - h.dominantNM[i-1]) / (h.dominantNM[i] - h.dominantNM[i-1])
	return h.x[i-1] + t*(h.x[i]-h.x[i-1]), h.y[i-1] + t*(h.y[i]-h.y[i-1])
}
