package simfab

import (
	"math"
	"slices"
	"sync"
	"testing"

	"gonum.org/v1/gonum/stat"
)

// sample is what one wafer's readings come to.
type sample struct {
	w                    *Wafer
	peak, peakSD, fwhm   float64
	dominant, dominantSD float64
	voltageSD, lightCV   float64
	voltageR, lightR     float64 // correlation with the dominant wavelength
	dead, leaky, leakMax float64
}

var grownOnce = sync.OnceValues(func() (*Fab, []sample) {
	f := New(Config{Seed: 1, Wafers: 300})
	samples := make([]sample, len(f.Wafers))
	var all sync.WaitGroup
	for worker := range 2 {
		all.Go(func() {
			for i := worker; i < len(samples); i += 2 {
				samples[i] = sampleOf(f.Measure(i))
			}
		})
	}
	all.Wait()
	return f, samples
})

func sampleOf(pl, probe *Reading) sample {
	s := sample{w: pl.Wafer}
	var peak, fwhm, v, light, dom []float64
	for k := range pl.X {
		if pl.Columns[0].K[k] != NoValue {
			peak, fwhm = append(peak, pl.value(0, k)), append(fwhm, pl.value(1, k))
		}
	}
	for k := range probe.X {
		if probe.Columns[4].K[k] == NoValue {
			s.dead++
			continue
		}
		v, light, dom = append(v, probe.value(0, k)), append(light, probe.value(3, k)), append(dom, probe.value(4, k))
		if leak := probe.value(2, k); leak > 0.02 {
			s.leaky++
			s.leakMax = max(s.leakMax, leak)
		}
	}
	n := float64(len(probe.X))
	s.dead, s.leaky = s.dead/n, s.leaky/n
	s.peak, s.peakSD = stat.MeanStdDev(peak, nil)
	s.fwhm = stat.Mean(fwhm, nil)
	s.dominant, s.dominantSD = stat.MeanStdDev(dom, nil)
	_, s.voltageSD = stat.MeanStdDev(v, nil)
	mean, sd := stat.MeanStdDev(light, nil)
	s.lightCV = sd / mean
	s.voltageR, s.lightR = stat.Correlation(dom, v, nil), stat.Correlation(dom, light, nil)
	return s
}

func (m *Reading) value(c, k int) float64 {
	return float64(m.Columns[c].K[k]) / scales[m.Columns[c].Decimals]
}

func byRecipe(recipe string) (chosen []sample) {
	_, all := grownOnce()
	for _, s := range all {
		if s.w.Recipe.Name == recipe {
			chosen = append(chosen, s)
		}
	}
	return chosen
}

func median(samples []sample, of func(sample) float64) float64 {
	var v []float64
	for _, s := range samples {
		v = append(v, of(s))
	}
	slices.Sort(v)
	return stat.Quantile(0.5, stat.LinInterp, v, nil)
}

func TestMagnitudesAreThoseOfTheField(t *testing.T) {
	t.Parallel()
	type limits struct{ low, high float64 }
	// Where the ranges come from, per row: spread inside a wafer of about 2 nm in
	// blue (doi 10.1007/s11431-010-4180-4; 0.85 to 3.7 seen) and 3 to 6 nm in
	// green; widths and dominant − peak of measured packaged LEDs; forward
	// voltage 0.02 to 0.06 V and light 3 to 8 % inside a wafer, |r| 0.2 to 0.5
	// with wavelength, 0.5 to 5 % opens and shorts: common practice.
	for _, c := range []struct {
		what   string
		of     func(sample) float64
		recipe map[string]limits
	}{
		{"sd of the PL peak, nm", func(s sample) float64 { return s.peakSD },
			map[string]limits{"blue-455": {1.5, 2.5}, "green-525": {3, 6}, "red-625": {0.7, 2}}},
		{"width, nm", func(s sample) float64 { return s.fwhm },
			map[string]limits{"blue-455": {18, 20}, "green-525": {29, 44}, "red-625": {15, 18}}},
		{"dominant − emission peak, nm", func(s sample) float64 { return s.dominant - s.peak - s.w.Recipe.optics.emissionNM },
			map[string]limits{"blue-455": {3.7, 4.4}, "green-525": {4.4, 6.7}, "red-625": {-14, -9}}},
		{"sd of forward voltage, V", func(s sample) float64 { return s.voltageSD }, all(limits{0.02, 0.06})},
		{"sd of light over its mean", func(s sample) float64 { return s.lightCV }, all(limits{0.03, 0.08})},
		{"|r| of voltage and wavelength", func(s sample) float64 { return math.Abs(s.voltageR) }, all(limits{0.2, 0.5})},
		{"|r| of light and wavelength", func(s sample) float64 { return math.Abs(s.lightR) }, all(limits{0.2, 0.5})},
		{"share of opens and shorts", func(s sample) float64 { return s.dead }, all(limits{0.005, 0.05})},
		{"share over 0.02 µA", func(s sample) float64 { return s.leaky }, all(limits{0.005, 0.05})},
		{"worst leak, µA", func(s sample) float64 { return s.leakMax }, all(limits{1, 20})},
	} {
		for recipe, want := range c.recipe {
			got := median(byRecipe(recipe), c.of)
			t.Logf("%s, %s: %.4g", recipe, c.what, got)
			if got < want.low || got > want.high {
				t.Errorf("%s, %s: median over wafers %.4g, want %g to %g", recipe, c.what, got, want.low, want.high)
			}
		}
	}
}

func all[T any](l T) map[string]T {
	return map[string]T{"blue-455": l, "green-525": l, "red-625": l}
}

// line fits y = a + b·x by least squares; se is the standard error of b.
func line(x, y []float64) (b, se float64) {
	a, b := stat.LinearRegression(x, y, nil, false)
	var rss, sxx float64
	mean := stat.Mean(x, nil)
	for i := range x {
		rss += math.Pow(y[i]-a-b*x[i], 2)
		sxx += math.Pow(x[i]-mean, 2)
	}
	return b, math.Sqrt(rss / float64(len(x)-2) / sxx)
}

// runMeans gives the mean measured PL peak per run, each wafer freed of its
// pocket's true offset.
func runMeans(reactor ReactorTruth) (runs, means []float64) {
	_, samples := grownOnce()
	for _, run := range reactor.Runs {
		var peaks []float64
		for _, s := range samples {
			if s.w.Run.Reactor == reactor.Name && s.w.Run.Number == run.Run {
				offset := -s.w.Recipe.optics.nmPerDegC * s.w.Run.carrier.degC[s.w.pocket]
				peaks = append(peaks, s.peak-offset)
			}
		}
		runs, means = append(runs, float64(run.Run)), append(means, stat.Mean(peaks, nil))
	}
	return runs, means
}

func TestReactorsBehaveAsTheTruthSays(t *testing.T) {
	t.Parallel()
	f, _ := grownOnce()
	states := map[string]string{}
	for _, reactor := range f.Truth().Reactors {
		runs, means := runMeans(reactor)
		states[reactor.Name] = reactor.State
		switch reactor.State {
		case "walking":
			from := int(reactor.Walk.SinceRun) - reactor.Runs[0].Run
			b, se := line(runs[from:], means[from:])
			t.Logf("%s: %+.3f ± %.3f nm per run since %d", reactor.Name, b, se, reactor.Walk.SinceRun)
			if math.Abs(b-reactor.Walk.NMPerRun) > 3*se || b < 4*se {
				t.Errorf("%s: slope %.3f ± %.3f nm per run, grown with %.3f", reactor.Name, b, se, reactor.Walk.NMPerRun)
			}
		case "stepped":
			at := reactor.Step.FirstRun - reactor.Runs[0].Run
			if step := stat.Mean(means[at:], nil) - stat.Mean(means[:at], nil); math.Abs(step-reactor.Step.NM) > 0.8 {
				t.Errorf("%s: step %.2f nm, grown with %.2f", reactor.Name, step, reactor.Step.NM)
			}
		default:
			if b, se := line(runs, means); math.Abs(b) > 3*se {
				t.Errorf("%s is steady, but moves %.3f ± %.3f nm per run", reactor.Name, b, se)
			}
		}
	}
	want := map[string]string{"Heron": "walking", "Gannet": "stepped", "Tern": "steady", "Petrel": "steady"}
	for name, state := range want {
		if states[name] != state {
			t.Errorf("%s is %q, want %q", name, states[name], state)
		}
	}
}
