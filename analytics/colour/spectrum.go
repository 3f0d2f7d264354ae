package colour

import (
	"math"
	"sort"
)

// Spectrum is spectral power over wavelength, in any unit of power per nm. It does
// not change.
type Spectrum struct {
	nm    []float64 // ascending
	power []float64
}

// Limits of a spectrum.
const (
	fewestPoints = 5
	noiseFloor   = 0.02 // of the maximum: how far below 0 noise may reach
	openEnd      = 0.01 // of the maximum: more than this at an end is a cut emission
	coveredFrom  = 380  // a range that reaches from here
	coveredTo    = 780  // to here is all that CIE 15 asks for, whatever its ends hold
)

// NewSpectrum takes wavelengths in nm, ascending at any step, and power per nm in
// any unit. The slices are copied. Noise below 0 down to 2 % of the maximum
// counts as measured; an array spectrometer's dark correction leaves it on both
// sides of 0, and cutting one side off would shift sums.
//
// Errors wrap analytics.ErrInvalid and name the row from 1: fewer than 5 points,
// values that are not finite, wavelengths out of order or twice, power more below
// 0 than noise is, no power at all or none between 360 nm and 830 nm, and a range
// that stops inside the emission.
func NewSpectrum(wavelengthNM, power []float64) (*Spectrum, error) {
	n := len(wavelengthNM)
	if n != len(power) {
		return nil, invalid("%d wavelengths for %d powers", n, len(power))
	}
	if n < fewestPoints {
		return nil, invalid("a spectrum of %d points: at least %d are needed to tell its shape", n, fewestPoints)
	}
	highest := 0.0
	for i, nm := range wavelengthNM {
		switch {
		case math.IsNaN(nm) || math.IsInf(nm, 0) || nm <= 0:
			return nil, invalid("row %d: %g is no wavelength in nm", i+1, nm)
		case math.IsNaN(power[i]) || math.IsInf(power[i], 0):
			return nil, invalid("row %d: power %g at %g nm is not finite", i+1, power[i], nm)
		case i > 0 && nm == wavelengthNM[i-1]:
			return nil, invalid("row %d: wavelength %g nm stands twice", i+1, nm)
		case i > 0 && nm < wavelengthNM[i-1]:
			return nil, invalid("row %d: wavelength %g nm does not follow %g nm; sort the rows by wavelength", i+1, nm, wavelengthNM[i-1])
		}
		highest = max(highest, power[i])
	}
	if highest == 0 {
		return nil, invalid("the spectrum has no power")
	}
	for i, p := range power {
		if p < -noiseFloor*highest {
			return nil, invalid("row %d: power %g at %g nm is below 0 by more than noise; subtract the right dark reading", i+1, p, wavelengthNM[i])
		}
	}
	s := &Spectrum{append([]float64(nil), wavelengthNM...), append([]float64(nil), power...)}
	return s, s.checkEnds(highest)
}

func (s *Spectrum) checkEnds(highest float64) error {
	last := len(s.nm) - 1
	if s.nm[last] < firstNM || s.nm[0] > lastNM {
		return invalid("the spectrum lies between %g nm and %g nm, outside what the eye sees (360 nm to 830 nm); wavelengths are in nm", s.nm[0], s.nm[last])
	}
	for _, end := range []struct {
		at      int
		covered bool
		side    string
	}{{0, s.nm[0] <= coveredFrom, "begins"}, {last, s.nm[last] >= coveredTo, "ends"}} {
		if share := s.power[end.at] / highest; share > openEnd && !end.covered {
			return invalid("the spectrum %s at %g nm, where the power is still %.0f %% of its maximum: measure the whole emission", end.side, s.nm[end.at], 100*share)
		}
	}
	return nil
}

// XYZ is the tristimulus values of the spectrum, ∫ S x̄ dλ and so on, in units of
// power; 683 times Y is the luminous quantity. Spectra coarser than 1 nm are
// first interpolated to 1 nm: with Sprague's fifth-order formula where the step is
// regular (CIE 15:2018, 7.2.1, and CIE 167:2005), else by a monotone cubic (Fritsch
// and Carlson, SIAM J. Numer. Anal. 17 (1980) 238). Finer ones are integrated as
// they are, piecewise linear against the linear observer. Outside its range the
// spectrum is 0.
func (s *Spectrum) XYZ() XYZ {
	fine := s.fine()
	var c XYZ
	fine.each(func(nm, weighted float64) {
		x, y, z := observerAt(nm)
		c.X, c.Y, c.Z = c.X+weighted*x, c.Y+weighted*y, c.Z+weighted*z
	})
	return c
}

// each walks the trapezoidal rule over the spectrum's points and the whole
// nanometres between them: power times width.
func (s *Spectrum) each(visit func(nm, weighted float64)) {
	nm, power := s.merged()
	for i := range nm {
		width := 0.0
		if i > 0 {
			width += nm[i] - nm[i-1]
		}
		if i < len(nm)-1 {
			width += nm[i+1] - nm[i]
		}
		visit(nm[i], power[i]*width/2)
	}
}

// merged adds the whole nanometres, at which the observer bends.
func (s *Spectrum) merged() (nm, power []float64) {
	for i := range s.nm {
		if i > 0 {
			a, b := s.nm[i-1], s.nm[i]
			for w := math.Floor(a) + 1; w < b; w++ {
				t := (w - a) / (b - a)
				nm, power = append(nm, w), append(power, s.power[i-1]+t*(s.power[i]-s.power[i-1]))
			}
		}
		nm, power = append(nm, s.nm[i]), append(power, s.power[i])
	}
	return nm, power
}

// RadiantFlux is ∫ S dλ, in units of power.
func (s *Spectrum) RadiantFlux() float64 {
	sum := 0.0
	s.fine().each(func(_, weighted float64) { sum += weighted })
	return sum
}

// LuminousEfficacy is the luminous efficacy of radiation in lm/W: 683 ∫ S V dλ over
// ∫ S dλ (CIE S 017, 17-21-090).
func (s *Spectrum) LuminousEfficacy() float64 { return KM * s.XYZ().Y / s.RadiantFlux() }

// CentroidNM is the mean wavelength, weighted by power, in nm.
func (s *Spectrum) CentroidNM() float64 {
	sum, moment := 0.0, 0.0
	s.fine().each(func(nm, weighted float64) { sum, moment = sum+weighted, moment+nm*weighted })
	return moment / sum
}

// fine is the spectrum at steps of 1 nm or less.
func (s *Spectrum) fine() *Spectrum {
	step, regular := s.step()
	switch {
	case step <= 1+1e-9:
		return s
	case regular && len(s.nm) >= 6:
		return s.resampled(s.sprague(step))
	}
	return s.resampled(s.monotone())
}

// step is the widest step, and whether all are the same.
func (s *Spectrum) step() (widest float64, regular bool) {
	narrowest := math.Inf(1)
	for i := 1; i < len(s.nm); i++ {
		widest, narrowest = max(widest, s.nm[i]-s.nm[i-1]), min(narrowest, s.nm[i]-s.nm[i-1])
	}
	return widest, widest-narrowest < 1e-6*widest
}

// resampled takes an interpolation at the spectrum's points and at whole
// nanometres.
func (s *Spectrum) resampled(at func(nm float64) float64) *Spectrum {
	nm, power := s.merged()
	for i, w := range nm {
		j := sort.SearchFloat64s(s.nm, w)
		if j < len(s.nm) && s.nm[j] == w {
			continue
		}
		power[i] = at(w)
	}
	return &Spectrum{nm, power}
}

// sprague interpolates between regular points by Sprague's formula; beyond the
// ends it takes the two extra points that CIE 15 extrapolates from six.
func (s *Spectrum) sprague(step float64) func(nm float64) float64 {
	p, n := s.power, len(s.power)
	outer := func(a, b, c, d, e, f float64) (near, far float64) {
		// CIE 15:2018, table of Sprague's end coefficients over 209.
		near = (508*a - 540*b + 488*c - 367*d + 144*e - 25*f) / 209
		far = (884*a - 1960*b + 3033*c - 2648*d + 1080*e - 180*f) / 209
		return near, far
	}
	l1, l2 := outer(p[0], p[1], p[2], p[3], p[4], p[5])
	r1, r2 := outer(p[n-1], p[n-2], p[n-3], p[n-4], p[n-5], p[n-6])
	ext := append(append([]float64{l2, l1}, p...), r1, r2)
	return func(nm float64) float64 {
		at := (nm - s.nm[0]) / step
		i := max(0, min(n-2, int(at)))
		x, y := at-float64(i), ext[i:]
		a0 := y[2]
		a1 := (2*y[0] - 16*y[1] + 16*y[3] - 2*y[4]) / 24
		a2 := (-y[0] + 16*y[1] - 30*y[2] + 16*y[3] - y[4]) / 24
		a3 := (-9*y[0] + 39*y[1] - 70*y[2] + 66*y[3] - 33*y[4] + 7*y[5]) / 24
		a4 := (13*y[0] - 64*y[1] + 126*y[2] - 124*y[3] + 61*y[4] - 12*y[5]) / 24
		a5 := (-5*y[0] + 25*y[1] - 50*y[2] + 50*y[3] - 25*y[4] + 5*y[5]) / 24
		return a0 + x*(a1+x*(a2+x*(a3+x*(a4+x*a5))))
	}
}

// monotone interpolates between irregular points by a cubic that neither
// overshoots nor turns between them.
func (s *Spectrum) monotone() func(nm float64) float64 {
	n := len(s.nm)
	slope, tangent := make([]float64, n-1), make([]float64, n)
	for i := range slope {
		slope[i] = (s.power[i+1] - s.power[i]) / (s.nm[i+1] - s.nm[i])
	}
	tangent[0], tangent[n-1] = slope[0], slope[n-2]
	for i := 1; i < n-1; i++ {
		if a, b := slope[i-1], slope[i]; a*b > 0 { // weighted harmonic mean
			h0, h1 := s.nm[i]-s.nm[i-1], s.nm[i+1]-s.nm[i]
			tangent[i] = 3 * (h0 + h1) / ((2*h1+h0)/a + (h1+2*h0)/b)
		}
	}
	return func(nm float64) float64 {
		i := max(0, min(n-2, sort.SearchFloat64s(s.nm, nm)-1))
		h := s.nm[i+1] - s.nm[i]
		t := (nm - s.nm[i]) / h
		a, b := s.power[i], s.power[i+1]
		return (1+2*t)*(1-t)*(1-t)*a + t*(1-t)*(1-t)*h*tangent[i] + t*t*(3-2*t)*b + t*t*(t-1)*h*tangent[i+1]
	}
}
