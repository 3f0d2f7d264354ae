package colour

import (
	"encoding/json"
	"errors"
	"math"
	"slices"
	"strings"
	"testing"

	"epitally/analytics"
)

func TestSpectrumRefuses(t *testing.T) {
	t.Parallel()
	good := []float64{440, 445, 450, 455, 460, 465}
	for _, c := range []struct {
		nm, power []float64
		want      string
	}{
		{good[:3], []float64{0, 1, 0}, "3 points"},
		{good, []float64{0, 1, 0}, "6 wavelengths for 3 powers"},
		{good, []float64{0, 0.5, 1, math.NaN(), 0.5, 0}, "row 4: power NaN at 455 nm"},
		{good, []float64{0, 0.5, 1, -0.5, 0.5, 0}, "row 4: power -0.5 at 455 nm is below 0"},
		{good, []float64{0, 0, 0, 0, 0, 0}, "no power"},
		{good, []float64{0, 0, 0, 0.5, 1, 0.9}, "ends at 465 nm, where the power is still 90 %"},
		{good, []float64{0.3, 0.5, 1, 0.5, 0.1, 0}, "begins at 440 nm"},
		{[]float64{440, 445, 445, 455, 460, 465}, []float64{0, 0.5, 1, 0.5, 0.1, 0}, "row 3: wavelength 445 nm stands twice"},
		{[]float64{440, 450, 445, 455, 460, 465}, []float64{0, 0.5, 1, 0.5, 0.1, 0}, "row 3: wavelength 445 nm does not follow 450 nm"},
		{[]float64{0.44, 0.45, 0.46, 0.47, 0.48, 0.49}, []float64{0, 0.5, 1, 0.5, 0.1, 0}, "wavelengths are in nm"},
		{good, []float64{0, 0.5, 1, -0.011, 0.5, 0}, "row 4: power -0.011 at 455 nm is below 0 by more than noise"},
		{good, []float64{0, 0.5, 1e308, 1e308, 0.5, 0}, "no unit of power"},
		{good, []float64{0, 5e-324, 1e-200, 5e-324, 0, 0}, "no unit of power"},
		{[]float64{440, 450, 460, 470, 1e9}, []float64{0, 1, 0.5, 0, 0}, "row 5: 1e+09 is no wavelength in nm"},
		{[]float64{250, 260, 270, 280, 300, 365}, []float64{0, 1, 0.5, 0, 0, 0}, "no power between 360 nm and 830 nm, where the eye sees; its highest is at 260 nm"},
		{[]float64{380, 400, 500, 550, 551, 552, 600, 780}, []float64{-.01, -.01, -.01, -.01, 1, -.01, -.01, -.01}, "adds up to more"},
		{[]float64{math.Inf(-1), 445, 450, 455, 460, 465}, []float64{0, 0.5, 1, 0.5, 0.1, 0}, "row 1: -Inf is no wavelength"},
	} {
		_, err := NewSpectrum(c.nm, c.power)
		if !errors.Is(err, analytics.ErrInvalid) || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%v %v gives %v, want %q", c.nm, c.power, err, c.want)
		}
	}
	if _, err := NewSpectrum(good, []float64{-0.01, 0.5, 1, 0.5, -0.01, 0}); err != nil {
		t.Errorf("noise about 0: %v", err)
	}
}

// A line too narrow for its step does not swing below 0: Sprague's formula would
// leave -13 % beside a single point.
func TestNarrowLinesDoNotSwing(t *testing.T) {
	t.Parallel()
	for _, power := range [][]float64{{0, 0, 0, 1, 0, 0, 0}, {0, 0, 0, 1, 1, 0, 0}, {0, 0, 0.5, 1, 0.5, 0, 0}} {
		s, err := NewSpectrum([]float64{440, 450, 460, 470, 480, 490, 500}, power)
		if err != nil {
			t.Fatal(err)
		}
		if low := slices.Min(s.fine().power); low < -noiseFloor {
			t.Errorf("%v falls to %g", power, low)
		}
	}
}

// FuzzSpectrum looks for spectra that are taken and give numbers that are none.
func FuzzSpectrum(f *testing.F) {
	f.Add(440.0, 5.0, 0.0, 0.5, 1.0, 0.4, 0.0, 0.0)
	f.Add(440.0, 1e9, 0.0, 0.5, 1.0, 0.4, 0.0, 0.0)
	f.Add(350.0, 0.25, -0.009, 1e-90, 1.0, 0.4, 0.0, -0.01)
	f.Add(440.0, 20.0, 0.0, 1e99, 1e100, 0.0, 0.0, 0.0)
	f.Fuzz(func(t *testing.T, from, step, a, b, c, d, e, g float64) {
		nm := make([]float64, 6)
		for i := range nm {
			nm[i] = from + float64(i)*step
		}
		s, err := NewSpectrum(nm, []float64{a, b, c, d, e, g})
		if err != nil {
			return
		}
		answer, err := Describe(Question{Spectrum: s, White: WhiteE, RadiantFluxMW: 100, CurrentMA: 100, VoltageV: 3})
		if err != nil {
			if !errors.Is(err, analytics.ErrInvalid) {
				t.Errorf("%v", err)
			}
			return
		}
		if _, err := json.Marshal(answer); err != nil { // refuses NaN and infinities
			t.Errorf("%v: %+v", err, answer)
		}
		if p := *answer.PeakWavelengthNM; p < nm[0] || p > nm[5] {
			t.Errorf("peak %g outside %g to %g", p, nm[0], nm[5])
		}
		if d := answer.ExcitationPurity; d != nil && !(*d >= 0 && *d <= 1) {
			t.Errorf("purity %g", *d)
		}
	})
}
