package colour

import "math"

// Illuminant gives the relative spectral power of a CIE standard illuminant by its
// letter: E (equal energy) and A (the Planckian radiator of 2848 K with c₂ =
// 1.435e-2 m K, 100 at 560 nm; CIE 15:2018, 4.1) from 360 nm to 830 nm at 1 nm, and
// D65 from 300 nm to 780 nm at 5 nm. Any other name is analytics.ErrInvalid.
func Illuminant(name string) (*Spectrum, error) {
	switch name {
	case "E", "A":
		s := &Spectrum{make([]float64, len(observer)), make([]float64, len(observer))}
		for i := range observer {
			s.nm[i], s.power[i] = float64(firstNM+i), 100
			if name == "A" {
				s.power[i] = 100 * math.Pow(560/s.nm[i], 5) * math.Expm1(1.435e7/(2848*560)) / math.Expm1(1.435e7/(2848*s.nm[i]))
			}
		}
		return s, nil
	case "D65":
		s := &Spectrum{make([]float64, len(d65)), append([]float64(nil), d65[:]...)}
		for i := range d65 {
			s.nm[i] = 300 + 5*float64(i)
		}
		return s, nil
	}
	return nil, invalid("no illuminant is called %q: use E, A or D65", name)
}
