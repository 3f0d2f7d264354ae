package colour

import "math"

// Spectrum is spectral power over wavelength, in any unit of power per nm. It does
// not change.
type Spectrum struct {
	nm    []float64 // ascending
	power []float64
}

// Limits of a spectrum.
const (
	fewestPoints = 5
	noiseFloor   = 0.01 // of the maximum: how far below 0 noise may reach
	openEnd      = 0.01 // of the maximum: more than this at an end is a cut emission
	coveredFrom  = 380  // a range that reaches from here
	coveredTo    = 780  // to here is all that CIE 15 asks for, whatever its ends hold
	longestNM    = 5000 // longer is not in nm; bounds the work of interpolating to 1 nm
	faintest     = 1e-100
	strongest    = 1e100 // beyond these, sums would leave the range of numbers
)

// NewSpectrum takes wavelengths in nm, ascending at any step, and power per nm in
// any unit. The slices are copied. Noise below 0 down to 1 % of the maximum
// counts as measured; an array spectrometer's dark correction leaves it on both
// sides of 0, and cutting one side off would shift sums.
//
// Errors wrap analytics.ErrInvalid and name the row from 1: fewer than 5 points,
// values that are not finite, wavelengths out of order or twice or beyond 5000 nm,
// power more below 0 than noise is, none at all, none between 360 nm and 830 nm or
// less than the noise below 0, and a range that stops inside the emission.
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
		case !(nm > 0 && nm <= longestNM):
			return nil, invalid("row %d: %g is no wavelength in nm: they lie above 0 and up to %d", i+1, nm, longestNM)
		case math.IsNaN(power[i]) || math.IsInf(power[i], 0):
			return nil, invalid("row %d: power %g at %g nm is not finite", i+1, power[i], nm)
		case i > 0 && nm == wavelengthNM[i-1]:
			return nil, invalid("row %d: wavelength %g nm stands twice", i+1, nm)
		case i > 0 && nm < wavelengthNM[i-1]:
			return nil, invalid("row %d: wavelength %g nm does not follow %g nm; sort the rows by wavelength", i+1, nm, wavelengthNM[i-1])
		}
		highest = max(highest, power[i])
	}
	switch {
	case highest == 0:
		return nil, invalid("the spectrum has no power")
	case highest < faintest || highest > strongest:
		return nil, invalid("the highest power is %g: no unit of power gives such a number", highest)
	}
	for i, p := range power {
		if p < -noiseFloor*highest {
			return nil, invalid("row %d: power %g at %g nm is below 0 by more than noise; subtract the right dark reading", i+1, p, wavelengthNM[i])
		}
	}
	s := &Spectrum{append([]float64(nil), wavelengthNM...), append([]float64(nil), power...)}
	if err := s.checkEnds(highest); err != nil {
		return nil, err
	}
	return s, s.checkSums()
}

// checkSums refuses spectra whose colour would be that of noise.
func (s *Spectrum) checkSums() error {
	c := s.XYZ()
	if c == (XYZ{}) {
		return invalid("the spectrum has no power between %d nm and %d nm, where the eye sees; its highest is at %g nm", firstNM, lastNM, s.RawPeakNM())
	}
	if !(c.Y > 0 && c.X+c.Y+c.Z > 0 && s.RadiantFlux() > 0) {
		return invalid("the power below 0 adds up to more than that above: subtract the right dark reading")
	}
	return nil
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
// and Carlson, SIAM J. Numer. Anal. 17 (1980) 238), which also serves lines so narrow
// for their step that Sprague's would swing below 0. Finer ones are taken at the
// whole nanometres, linear between their points, and summed there as CIE 15:2018,
// 7.1 sums; a spectrum with lines so narrow that the sum would miss them is
// integrated over all its points instead. Outside its range the spectrum is 0.
func (s *Spectrum) XYZ() XYZ {
	c, _ := s.weighed()
	return c
}

// missed is how far the sum over whole nanometres may be from the integral over
// all points, in x, y and as a part of the power, before it misses something.
const missed = 0.002

// weighed is the tristimulus values with the power that they are of.
func (s *Spectrum) weighed() (c XYZ, power float64) {
	fine := s.fine()
	add := func(c *XYZ, power *float64) func(nm, weighted float64) {
		return func(nm, weighted float64) {
			x, y, z := observerAt(nm)
			c.X, c.Y, c.Z = c.X+weighted*x, c.Y+weighted*y, c.Z+weighted*z
			*power += weighted
		}
	}
	var integral XYZ
	var whole float64
	fine.each(add(&integral, &whole))
	fine.eachWhole(add(&c, &power))
	if c.XY().distance(integral.XY()) < missed && math.Abs(power-whole) < missed*whole {
		return c, power
	}
	return integral, whole
}

// eachWhole walks the whole nanometres, linear between the points: power times
// 1 nm.
func (s *Spectrum) eachWhole(visit func(nm, weighted float64)) {
	nm, power := s.merged()
	for i, w := range nm {
		if w == math.Floor(w) {
			visit(w, power[i])
		}
	}
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
func (s *Spectrum) LuminousEfficacy() float64 {
	c, power := s.weighed()
	return KM * c.Y / power
}

// CentroidNM is the mean wavelength, weighted by power, in nm.
func (s *Spectrum) CentroidNM() float64 {
	sum, moment := 0.0, 0.0
	s.fine().each(func(nm, weighted float64) { sum, moment = sum+weighted, moment+nm*weighted })
	return moment / sum
}
