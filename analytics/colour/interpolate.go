package colour

import (
	"math"
	"slices"
	"sort"
)

// fine is the spectrum at steps of 1 nm or less. A spectrum of which most steps are
// that fine is left as it is: an array spectrometer's, thinned where it is straight.
func (s *Spectrum) fine() *Spectrum {
	step, regular := s.step()
	switch {
	case s.medianStep() <= 1+1e-9:
		return s
	case regular && len(s.nm) >= 6:
		if smooth := s.resampled(s.sprague(step)); slices.Min(smooth.power) >= min(0, slices.Min(s.power))-noiseFloor*slices.Max(s.power) {
			return smooth
		}
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

func (s *Spectrum) medianStep() float64 {
	steps := make([]float64, len(s.nm)-1)
	for i := range steps {
		steps[i] = s.nm[i+1] - s.nm[i]
	}
	return median(steps)
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
