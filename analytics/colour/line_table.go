package colour

import (
	"math"
)

// PeakTable gives the dominant wavelength of many dies from peak and width under
// one line model: dominant − peak is linear between nodes of a dense grid. It does
// not change and may be shared.
type PeakTable struct {
	model        LineModel
	peak0, fwhm0 float64 // of the first node
	peaks, fwhms int     // nodes
	lowP, highP  float64 // range served
	lowF, highF  float64
	shift        []float64 // dominant − peak, row by row of one width
}

// Nodes of the table per nm of peak and of width. Peaks at whole eighths of a
// nanometre see a line at the same eighths from its peak, so that a row of nodes
// needs the line only once.
const (
	perPeak = 8
	perFWHM = 4
)

// maxNodes bounds a table's memory to a few megabytes.
const maxNodes = 600_000

// NewPeakTable makes the table for peaks and full widths at half maximum within
// the ranges given, in nm, against a white. Errors wrap analytics.ErrInvalid.
func NewPeakTable(m LineModel, white XY, peakLowNM, peakHighNM, fwhmLowNM, fwhmHighNM float64) (*PeakTable, error) {
	if err := m.Check(); err != nil {
		return nil, err
	}
	for _, corner := range [][2]float64{{peakLowNM, fwhmLowNM}, {peakHighNM, fwhmHighNM}} {
		if err := checkLine(corner[0], corner[1]); err != nil {
			return nil, err
		}
	}
	if peakHighNM < peakLowNM || fwhmHighNM < fwhmLowNM {
		return nil, invalid("the ranges of a peak table run backwards: %g to %g nm, %g to %g nm", peakLowNM, peakHighNM, fwhmLowNM, fwhmHighNM)
	}
	f, err := newFan(white)
	if err != nil {
		return nil, err
	}
	t := &PeakTable{model: m, lowP: peakLowNM, highP: peakHighNM, lowF: fwhmLowNM, highF: fwhmHighNM}
	t.peak0 = math.Floor(peakLowNM*perPeak) / perPeak
	t.fwhm0 = fwhmLowNM
	t.peaks = int(math.Ceil((peakHighNM-t.peak0)*perPeak)) + 2
	t.fwhms = int(math.Ceil((fwhmHighNM-t.fwhm0)*perFWHM)) + 2
	if t.peaks*t.fwhms > maxNodes {
		return nil, invalid("a peak table of %d × %d nodes is too large: narrow the ranges", t.peaks, t.fwhms)
	}
	t.shift = make([]float64, t.peaks*t.fwhms)
	for row := range t.fwhms {
		t.fillRow(f, row)
	}
	return t, nil
}

// fillRow works out the nodes of one width. The line is sampled once, at all
// distances in eighths of a nanometre that any peak of the row has from a
// wavelength of the observer.
func (t *PeakTable) fillRow(f *fan, row int) {
	fwhm := t.fwhm0 + float64(row)/perFWHM
	first := firstNM*perPeak - int(math.Round(t.peak0*perPeak)) - (t.peaks - 1) // shortest distance, in eighths
	samples := make([]float64, (lastNM-firstNM)*perPeak+t.peaks)
	for i := range samples {
		samples[i] = t.model.Power(float64(first+i)/perPeak, 0, fwhm)
	}
	for col := range t.peaks {
		line := samples[t.peaks-1-col:]
		var c XYZ
		for i := range observer {
			p := line[i*perPeak]
			if i == 0 || i == len(observer)-1 {
				p /= 2
			}
			c.X, c.Y, c.Z = c.X+p*observer[i][0], c.Y+p*observer[i][1], c.Z+p*observer[i][2]
		}
		t.shift[row*t.peaks+col] = math.NaN()
		if d, err := f.dominant(c.XY()); err == nil && !d.Complementary {
			t.shift[row*t.peaks+col] = d.WavelengthNM - t.peak0 - float64(col)/perPeak
		}
	}
}

// Dominant writes the dominant wavelength in nm of every die to dst; NaN where
// peak or width is missing or outside the table's range. All slices have the same
// length.
func (t *PeakTable) Dominant(dst, peak, fwhm []float64) {
	peak, fwhm = peak[:len(dst)], fwhm[:len(dst)]
	for i := range dst {
		p, w := peak[i], fwhm[i]
		if !(p >= t.lowP && p <= t.highP && w >= t.lowF && w <= t.highF) {
			dst[i] = math.NaN()
			continue
		}
		x, y := (p-t.peak0)*perPeak, (w-t.fwhm0)*perFWHM
		col, row := int(x), int(y)
		x, y = x-float64(col), y-float64(row)
		n := row*t.peaks + col
		a, b := t.shift[n:n+2:n+2], t.shift[n+t.peaks:n+t.peaks+2]
		low := a[0] + x*(a[1]-a[0])
		high := b[0] + x*(b[1]-b[0])
		dst[i] = p + low + y*(high-low)
	}
}
