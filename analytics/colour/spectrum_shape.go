package colour

import "math"

// RawPeakNM is the wavelength of the highest point.
func (s *Spectrum) RawPeakNM() float64 { return s.nm[s.highest()] }

func (s *Spectrum) highest() int {
	best := 0
	for i, p := range s.power {
		if p > s.power[best] {
			best = i
		}
	}
	return best
}

// top is the share of the maximum above which points take part in the fit of the
// peak.
const top = 0.8

// PeakNM is the peak wavelength in nm: the top of a parabola through the logarithm
// of power, fitted by least squares to the points about the highest one that reach
// 80 % of it, so that it does not jump from pixel to pixel as the highest point
// does. A line with fewer than three such points gives the parabola through the
// highest and its neighbours.
func (s *Spectrum) PeakNM() float64 {
	best := s.highest()
	first, last := best, best
	for first > 0 && s.power[first-1] >= top*s.power[best] {
		first--
	}
	for last < len(s.nm)-1 && s.power[last+1] >= top*s.power[best] {
		last++
	}
	if last-first < 2 {
		first, last = max(0, best-1), min(len(s.nm)-1, best+1)
	}
	// Least squares of ln S = a + b t + c t², t from the highest point; weights S²
	// make the errors of ln S alike.
	var m [3][4]float64
	for i := first; i <= last; i++ {
		if s.power[i] <= 0 {
			continue
		}
		t, y, w := s.nm[i]-s.nm[best], math.Log(s.power[i]/s.power[best]), s.power[i]*s.power[i]
		powers := [5]float64{1, t, t * t, t * t * t, t * t * t * t}
		for r := range 3 {
			for c := range 3 {
				m[r][c] += w * powers[r+c]
			}
			m[r][3] += w * y * powers[r]
		}
	}
	fit, ok := solve3(m)
	at := -fit[1] / (2 * fit[2])
	if !ok || !(fit[2] < 0) || s.nm[best]+at < s.nm[first] || s.nm[best]+at > s.nm[last] {
		return s.nm[best]
	}
	return s.nm[best] + at
}

// solve3 solves three equations by elimination with pivots.
func solve3(m [3][4]float64) (x [3]float64, ok bool) {
	for c := range 3 {
		pivot := c
		for r := c + 1; r < 3; r++ {
			if math.Abs(m[r][c]) > math.Abs(m[pivot][c]) {
				pivot = r
			}
		}
		if m[pivot][c] == 0 {
			return x, false
		}
		m[c], m[pivot] = m[pivot], m[c]
		for r := c + 1; r < 3; r++ {
			f := m[r][c] / m[c][c]
			for k := c; k < 4; k++ {
				m[r][k] -= f * m[c][k]
			}
		}
	}
	for r := 2; r >= 0; r-- {
		x[r] = m[r][3]
		for k := r + 1; k < 3; k++ {
			x[r] -= m[r][k] * x[k]
		}
		x[r] /= m[r][r]
	}
	return x, true
}

// FWHM gives the full width at half maximum in nm and the wavelengths at which
// power, going out from the highest point to either side, first falls to half of
// it, linear between points. An emission that does not fall to half on a side is
// ErrNotMeaningful.
func (s *Spectrum) FWHM() (low, high, width float64, err error) {
	best := s.highest()
	half := s.power[best] / 2
	between := func(i, j int) float64 { // i inside, j outside
		return s.nm[i] + (s.nm[j]-s.nm[i])*(s.power[i]-half)/(s.power[i]-s.power[j])
	}
	i := best
	for i > 0 && s.power[i-1] > half {
		i--
	}
	j := best
	for j < len(s.nm)-1 && s.power[j+1] > half {
		j++
	}
	if i == 0 || j == len(s.nm)-1 {
		return 0, 0, 0, notMeaningful("the power does not fall to half of its maximum on both sides of %g nm", s.nm[best])
	}
	low, high = between(i, i-1), between(j, j+1)
	return low, high, high - low, nil
}
