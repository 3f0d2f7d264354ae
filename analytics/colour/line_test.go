package colour

import (
	"math"
	"math/rand/v2"
	"sort"
	"strings"
	"testing"

	"epitally/testdata/sharedtest"
)

// Every model has the peak and the width that were asked for, by its definition.
func TestLinesHavePeakAndWidth(t *testing.T) {
	t.Parallel()
	models := append([]LineModel(nil), lineModels...)
	for _, m := range measuredLines {
		models = append(models, m.line)
	}
	for _, m := range models {
		if err := m.Check(); err != nil {
			t.Errorf("%s: %v", m.Name, err)
		}
		const peak, fwhm = 455.3, 19.0
		short := fwhm / (1 + m.Ratio)
		for nm, want := range map[float64]float64{peak: 1, peak - short: 0.5, peak + fwhm - short: 0.5} {
			if got := m.Power(nm, peak, fwhm); math.Abs(got-want) > 1e-6 {
				t.Errorf("%s (%g): %g at %g nm, want %g", m.Name, m.Ratio, got, nm, want)
			}
		}
		if m.Power(peak-0.5, peak, fwhm) >= 1 || m.Power(peak+0.5, peak, fwhm) >= 1 {
			t.Errorf("%s: the peak is not the highest point", m.Name)
		}
	}
}

// Dominant − peak of a Gaussian line, from the field's numbers (arithmetic).
func TestGaussianGivesTooLittle(t *testing.T) {
	t.Parallel()
	m, err := LineModelByName("gaussian")
	if err != nil {
		t.Fatal(err)
	}
	for _, c := range []struct{ peak, fwhm, want float64 }{{450, 18, 1.3}, {460, 20, 1.0}, {520, 32, 0.2}, {525, 33, 1.1}, {590, 15, -0.5}, {620, 17, -2.4}, {640, 18, -3.5}} {
		d, err := m.Dominant(c.peak, c.fwhm, WhiteE)
		if err != nil || math.Abs(d-c.peak-c.want) > 0.06 {
			t.Errorf("%g/%g nm: dominant − peak %.2f %v, want %.1f", c.peak, c.fwhm, d-c.peak, err, c.want)
		}
	}
}

var measuredSets = [][]string{
	{"434", "434-b", "448", "452", "454", "457", "462", "467", "467-b"},
	{"493", "498", "503", "515", "517", "519", "519-b", "547"},
	{"594", "596", "614", "629", "629-b", "643", "663"},
}

func measuredSpectra(t *testing.T, names []string) (list []*Spectrum) {
	t.Helper()
	for _, name := range names {
		_, c := columnsOf(t, sharedtest.Read(t, "data/led_spectra/led-peak-"+name+".csv"))
		first, last := sort.SearchFloat64s(c[0], 380), sort.SearchFloat64s(c[0], 800)
		s, err := NewSpectrum(c[0][first:last], c[1][first:last])
		if err != nil {
			t.Fatalf("%s: %v", name, err)
		}
		list = append(list, s)
	}
	return list
}

// TestDefaultLinesAreTheFits fits the default lines again from measured spectra:
// the residuals written beside them must be what they leave.
func TestDefaultLinesAreTheFits(t *testing.T) {
	t.Parallel()
	for i, names := range measuredSets {
		spectra := measuredSpectra(t, names)
		fitted, err := FitLineShape(spectra)
		if err != nil {
			t.Fatal(err)
		}
		stated := measuredLines[i].line
		square := 0.0
		for _, s := range spectra {
			target, err := newLineTarget(s)
			if err != nil {
				t.Fatal(err)
			}
			e, _ := target.errors(stated)
			square += e * e
		}
		rms := math.Sqrt(square / float64(len(spectra)))
		if math.Abs(rms-stated.ResidualNM) > 0.02 || math.Abs(fitted.ResidualNM-stated.ResidualNM) > 0.02 {
			t.Errorf("line %d: stated residual %.2f nm, left %.3f nm, fitted anew %.3f nm (%+v)", i, stated.ResidualNM, rms, fitted.ResidualNM, fitted)
		}
	}
}

// A line drawn from a model is found again by the fit.
func TestFitFindsItsOwnLine(t *testing.T) {
	t.Parallel()
	truth := LineModel{Name: "split-pearson", Ratio: 1.25, ShortTail: 4, LongTail: 1.6}
	var spectra []*Spectrum
	for _, peak := range []float64{448, 455, 463} {
		s, err := truth.Spectrum(peak, 19)
		if err != nil {
			t.Fatal(err)
		}
		spectra = append(spectra, s)
	}
	m, err := FitLineShape(spectra)
	if err != nil {
		t.Fatal(err)
	}
	if m.ResidualNM > 0.05 || math.Abs(m.Ratio-truth.Ratio) > 0.1 || math.Abs(m.LongTail-truth.LongTail) > 0.1 {
		t.Errorf("%+v", m)
	}
	white, err := NewSpectrum([]float64{380, 450, 550, 650, 780}, []float64{1, 1, 1, 1, 1})
	if err != nil {
		t.Fatal(err)
	}
	if _, err := FitLineShape([]*Spectrum{white}); err == nil {
		t.Error("a flat spectrum is taken for a line")
	}
}

func TestPeakRelationIgnoresBadDies(t *testing.T) {
	t.Parallel()
	rng := rand.New(rand.NewPCG(6, 6))
	var peak, dominant []float64
	for i := range 5000 {
		p := 452 + 2*rng.NormFloat64()
		d := p + 4 - 0.1*(p-452) + 0.15*rng.NormFloat64()
		switch {
		case i%7 == 0:
			d += 30 * rng.Float64() // a misread seventh
		case i%50 == 0:
			d = math.NaN()
		}
		peak, dominant = append(peak, p), append(dominant, d)
	}
	r, err := FitPeakToDominant(peak, dominant)
	if err != nil {
		t.Fatal(err)
	}
	at452 := r.OffsetNM + r.Slope*(452-r.ReferenceNM)
	if math.Abs(at452-4) > 0.06 || math.Abs(r.Slope+0.1) > 0.02 || math.Abs(r.ResidualNM-0.15) > 0.05 {
		t.Errorf("%+v: %g at 452 nm", r, at452)
	}
	if _, err := FitPeakToDominant(peak[:10], dominant[:10]); err == nil {
		t.Error("ten dies are enough")
	}
	same := make([]float64, 30)
	for i := range same {
		same[i] = 455
	}
	if r, err := FitPeakToDominant(same, same); err != nil || r.Slope != 0 || r.OffsetNM != 0 {
		t.Errorf("one peak: %+v %v", r, err)
	}
}

func TestPeakTableAgainstTheDirectComputation(t *testing.T) {
	t.Parallel()
	const tolerance = 0.005 // nm
	for _, c := range []struct {
		m              LineModel
		p1, p2, f1, f2 float64
	}{
		{DefaultLineModel(455), 440, 470, 12, 30}, {DefaultLineModel(525), 490, 550, 25, 45}, {DefaultLineModel(625), 590, 645, 12, 25},
		{LineModel{Name: "gaussian", Ratio: 1}, 430, 560, 15, 40}, {LineModel{Name: "split-ohno", Ratio: 1.3}, 430, 480, 10, 30},
	} {
		table, err := NewPeakTable(c.m, WhiteE, c.p1, c.p2, c.f1, c.f2)
		if err != nil {
			t.Fatal(err)
		}
		rng := rand.New(rand.NewPCG(1, 9))
		const n = 300
		peak, fwhm, got := make([]float64, n), make([]float64, n), make([]float64, n)
		for i := range peak {
			peak[i], fwhm[i] = c.p1+(c.p2-c.p1)*rng.Float64(), c.f1+(c.f2-c.f1)*rng.Float64()
		}
		peak[0], fwhm[0] = c.p2, c.f2
		peak[1], fwhm[1] = c.p1, c.f1
		table.Dominant(got, peak, fwhm)
		worst := 0.0
		for i := range peak {
			want, err := c.m.Dominant(peak[i], fwhm[i], WhiteE)
			if err != nil {
				t.Fatal(err)
			}
			worst = max(worst, math.Abs(got[i]-want))
		}
		if !(worst < tolerance) {
			t.Errorf("%s %g–%g nm: off by up to %g nm", c.m.Name, c.p1, c.p2, worst)
		}
		outside := []float64{c.p1 - 1, math.NaN(), c.p1}
		table.Dominant(got[:3], outside, []float64{c.f1, c.f1, c.f2 + 1})
		for i := range 3 {
			if !math.IsNaN(got[i]) {
				t.Errorf("outside its range the table gives %g", got[i])
			}
		}
	}
}

// Where no LED was measured there is no default: infrared wafers get no invented
// dominant wavelength, and the calculator says what its answer rests on.
func TestNoDefaultLineBeyondWhatWasMeasured(t *testing.T) {
	t.Parallel()
	nan := math.NaN()
	if m := DefaultPeakModel([]float64{740, 741, nan, nan}); m != nil {
		t.Errorf("740 nm: %+v", m)
	}
	if m := DefaultPeakModel([]float64{625, 626, nan, 740}); m == nil {
		t.Error("625 nm has no default line")
	}
	far, err := Describe(Question{Peak: &PeakQuestion{740, 25, DefaultLineModel(740)}, White: WhiteE, RadiantFluxMW: nan, CurrentMA: nan, VoltageV: nan})
	if err != nil || !strings.Contains(strings.Join(far.Notes, " "), "nobody has measured") {
		t.Errorf("%v: %v", err, far.Notes)
	}
	near, err := Describe(Question{Peak: &PeakQuestion{625, 17, DefaultLineModel(625)}, White: WhiteE, RadiantFluxMW: nan, CurrentMA: nan, VoltageV: nan})
	if err != nil || strings.Contains(strings.Join(near.Notes, " "), "nobody has measured") {
		t.Errorf("%v: %v", err, near.Notes)
	}
}

func TestPeakModels(t *testing.T) {
	t.Parallel()
	var tables PeakTables
	peak, fwhm, got := []float64{455, 460, math.NaN()}, []float64{19, 20, 20}, make([]float64, 3)
	relation := &PeakModel{ReferenceNM: 455, OffsetNM: 4, Slope: -0.1, ResidualNM: 0.3, FittedTo: "9,000 dies"}
	if err := tables.Dominant(got, relation, peak, nil); err != nil || got[0] != 459 || math.Abs(got[1]-463.5) > 1e-9 || !math.IsNaN(got[2]) {
		t.Errorf("relation: %v %v", got, err)
	}
	if want := "peak +4.00 nm at 455.0 nm, slope -0.100, fitted to 9,000 dies, residual ±0.3 nm"; relation.Describe() != want {
		t.Errorf("%q, want %q", relation.Describe(), want)
	}
	line := DefaultPeakModel(peak)
	if err := tables.Dominant(got, line, peak, fwhm); err != nil || math.Abs(got[0]-459) > 1 || !math.IsNaN(got[2]) {
		t.Errorf("line: %v %v", got, err)
	}
	if err := tables.Dominant(got, line, peak, nil); err != nil || !math.IsNaN(got[0]) {
		t.Errorf("a line without widths: %v %v", got, err)
	}
	for _, bad := range []PeakModel{{}, {Model: "bell"}, {Model: "gaussian", OffsetNM: 4}, {ReferenceNM: 455, OffsetNM: 90}, {ReferenceNM: 455, Ratio: 2}, {Model: "split-pearson", LongTail: 0.1}} {
		if err := bad.Check(); err == nil || !strings.Contains(err.Error(), "invalid") {
			t.Errorf("%+v: %v", bad, err)
		}
	}
}

func BenchmarkPeakTable(b *testing.B) {
	table, err := NewPeakTable(DefaultLineModel(455), WhiteE, 440, 470, 12, 30)
	if err != nil {
		b.Fatal(err)
	}
	const n = 50_000
	rng := rand.New(rand.NewPCG(1, 1))
	peak, fwhm, dst := make([]float64, n), make([]float64, n), make([]float64, n)
	for i := range peak {
		peak[i], fwhm[i] = 452+2*rng.NormFloat64(), 19+0.3*rng.NormFloat64()
	}
	b.ReportAllocs()
	for b.Loop() {
		table.Dominant(dst, peak, fwhm)
	}
	b.ReportMetric(float64(n)*float64(b.N)/b.Elapsed().Seconds()/1e6, "Mdies/s")
}

// BenchmarkNewPeakTable is what the first wafer of a recipe pays.
func BenchmarkNewPeakTable(b *testing.B) {
	for b.Loop() {
		if _, err := NewPeakTable(DefaultLineModel(455), WhiteE, 440, 470, 15, 25); err != nil {
			b.Fatal(err)
		}
	}
}
