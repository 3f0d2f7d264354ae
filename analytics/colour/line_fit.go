package colour

import (
	"fmt"
	"math"
	"slices"

	"gonum.org/v1/gonum/optimize"
)

// fewestPairs is how many dies a relation is fitted to at least.
const fewestPairs = 20

// FitLineShape fits one split-pearson line to measured spectra of one kind of LED:
// ratio and tails are common, peak and width each spectrum's own. It makes the
// squares of the errors in dominant wavelength (in nm, against E) and of the
// differences in shape (relative to the line's own square) smallest together, by
// Nelder and Mead's simplex. ResidualNM is the rms error in dominant wavelength.
// Errors wrap analytics.ErrInvalid.
func FitLineShape(spectra []*Spectrum) (LineModel, error) {
	if len(spectra) == 0 {
		return LineModel{}, invalid("no spectra to fit a line to")
	}
	targets := make([]lineTarget, len(spectra))
	for i, s := range spectra {
		t, err := newLineTarget(s)
		if err != nil {
			return LineModel{}, fmt.Errorf("spectrum %d: %w", i+1, err)
		}
		targets[i] = t
	}
	model := func(x []float64) LineModel {
		within := func(v, low, high float64) float64 { return low + (high-low)/(1+math.Exp(-v)) }
		return LineModel{Name: "split-pearson", Ratio: math.Exp(within(x[0], math.Log(lowestRatio), math.Log(highestRatio))),
			ShortTail: math.Exp(within(x[1], math.Log(lowestTail), math.Log(highestTail))),
			LongTail:  math.Exp(within(x[2], math.Log(lowestTail), math.Log(highestTail)))}
	}
	cost := func(x []float64) float64 {
		sum := 0.0
		for _, t := range targets {
			d, shape := t.errors(model(x))
			sum += d*d + 30*shape
		}
		return sum
	}
	result, err := optimize.Minimize(optimize.Problem{Func: cost}, []float64{0, -1, -1}, &optimize.Settings{MajorIterations: 400}, &optimize.NelderMead{})
	if result == nil {
		return LineModel{}, invalid("the line could not be fitted: %v", err)
	}
	best := model(result.X)
	square := 0.0
	for _, t := range targets {
		d, _ := t.errors(best)
		square += d * d
	}
	best.ResidualNM = math.Sqrt(square / float64(len(targets)))
	best.FittedTo = fmt.Sprintf("%d measured spectra", len(spectra))
	return best, nil
}

// lineTarget is what a line must come to.
type lineTarget struct {
	spectrum               *Spectrum
	peak, fwhm, dominant   float64
	highest, squareOfShape float64
}

func newLineTarget(s *Spectrum) (t lineTarget, err error) {
	_, _, width, err := s.FWHM()
	if err != nil {
		return t, err
	}
	d, err := DominantOf(s.XYZ().XY(), WhiteE)
	if err != nil {
		return t, err
	}
	t = lineTarget{spectrum: s, peak: s.PeakNM(), fwhm: width, dominant: d.WavelengthNM}
	if d.Complementary || d.ExcitationPurity < 0.5 {
		return t, invalid("its excitation purity is %.2f: no single line", d.ExcitationPurity)
	}
	t.highest = s.power[s.highest()]
	for _, p := range s.power {
		t.squareOfShape += p * p / (t.highest * t.highest)
	}
	return t, checkLine(t.peak, t.fwhm)
}

// errors gives the error in dominant wavelength in nm and the relative square of
// the differences in shape.
func (t *lineTarget) errors(m LineModel) (dominantNM, shape float64) {
	d, err := m.Dominant(t.peak, t.fwhm, WhiteE)
	if err != nil || math.IsNaN(d) {
		return 100, 1
	}
	for i, nm := range t.spectrum.nm {
		e := m.Power(nm, t.peak, t.fwhm) - t.spectrum.power[i]/t.highest
		shape += e * e
	}
	return d - t.dominant, shape / t.squareOfShape
}

// PeakRelation is a straight relation between peak and dominant wavelength:
// dominant = peak + OffsetNM + Slope·(peak − ReferenceNM).
type PeakRelation struct {
	ReferenceNM float64 // median peak of the dies it was fitted to
	OffsetNM    float64 // dominant − peak at the reference
	Slope       float64 // nm of dominant − peak per nm of peak; 0 when the peaks hardly differ
	ResidualNM  float64 // robust standard deviation about the relation, 1.4826·MAD
	N           int     // dies
	LowNM       float64 // range of the peaks
	HighNM      float64
}

// spreadForSlope is the range of peaks in nm, 5th to 95th percentile, under which
// a slope would be noise.
const spreadForSlope = 1.0

// FitPeakToDominant fits the relation to dies measured both ways by Theil and
// Sen's method: the median of the slopes between pairs of dies far apart in the
// order of peaks, then the median of the offsets; a quarter of bad dies does no
// harm. Dies with NaN in either are left out. The error wraps
// analytics.ErrInvalid for fewer than 20 dies.
func FitPeakToDominant(peakNM, dominantNM []float64) (PeakRelation, error) {
	if len(peakNM) != len(dominantNM) {
		return PeakRelation{}, invalid("%d peaks for %d dominant wavelengths", len(peakNM), len(dominantNM))
	}
	type pair struct{ peak, shift float64 }
	var pairs []pair
	for i, p := range peakNM {
		if shift := dominantNM[i] - p; !math.IsNaN(shift) && !math.IsInf(shift, 0) {
			pairs = append(pairs, pair{p, shift})
		}
	}
	n := len(pairs)
	if n < fewestPairs {
		return PeakRelation{}, invalid("%d dies have both a peak and a dominant wavelength; at least %d are needed", n, fewestPairs)
	}
	slices.SortFunc(pairs, func(a, b pair) int { return compare(a.peak, b.peak) })
	r := PeakRelation{ReferenceNM: pairs[n/2].peak, N: n, LowNM: pairs[0].peak, HighNM: pairs[n-1].peak}
	if pairs[n-1-n/20].peak-pairs[n/20].peak >= spreadForSlope {
		var slopes []float64
		for i := 0; i+n/2 < n; i++ { // each die with the one half the sample further on
			if gap := pairs[i+n/2].peak - pairs[i].peak; gap > 0 {
				slopes = append(slopes, (pairs[i+n/2].shift-pairs[i].shift)/gap)
			}
		}
		r.Slope = median(slopes)
	}
	rest := make([]float64, n)
	for i, p := range pairs {
		rest[i] = p.shift - r.Slope*(p.peak-r.ReferenceNM)
	}
	r.OffsetNM = median(rest)
	for i := range rest {
		rest[i] = math.Abs(rest[i] - r.OffsetNM)
	}
	r.ResidualNM = 1.4826 * median(rest)
	return r, nil
}

func compare(a, b float64) int {
	switch {
	case a < b:
		return -1
	case a > b:
		return 1
	}
	return 0
}

// median sorts v; 0 of none.
func median(v []float64) float64 {
	if len(v) == 0 {
		return 0
	}
	slices.Sort(v)
	return (v[(len(v)-1)/2] + v[len(v)/2]) / 2
}
