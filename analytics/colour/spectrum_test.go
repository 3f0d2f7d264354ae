package colour

import (
	"bytes"
	"encoding/csv"
	"encoding/json"
	"io"
	"math"
	"sort"
	"strconv"
	"testing"

	"epitally/testdata/sharedtest"
)

func TestSpectrumChecks(t *testing.T) {
	t.Parallel()
	eachCheck(t, "colour_spectrum.json", "spectrum_to_colour", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			Wavelength []float64 `json:"wavelength_nm"`
			Power      []float64 `json:"power"`
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		s, err := NewSpectrum(in.Wavelength, in.Power)
		if err != nil {
			t.Fatal(err)
		}
		c := s.XYZ()
		p := c.XY()
		out := map[string]float64{"x": p.X, "y": p.Y, "u_prime": p.UV().U, "v_prime": p.UV().V, "X_over_Y": c.X / c.Y, "Z_over_Y": c.Z / c.Y,
			"ler_lm_per_W": s.LuminousEfficacy(), "peak": s.PeakNM(), "centroid": s.CentroidNM()}
		if low, high, width, err := s.FWHM(); err == nil {
			out["fwhm"], out["half_height_centre"] = width, (low+high)/2
		}
		for name, white := range map[string]XY{"E": WhiteE, "D65": WhiteD65} {
			if d, err := DominantOf(p, white); err == nil {
				out["dominant_"+name], out["purity_"+name] = d.WavelengthNM, d.ExcitationPurity
			}
		}
		if cct, err := CCTOf(p); err == nil {
			out["cct_K"] = cct.K
		}
		fivesAreSummedWell(t, in.Wavelength, in.Power, p, out["cct_K"])
		return out
	})
}

// fivesAreSummedWell holds the checks at 5 nm to what CIE 15's interpolation reaches
// (their note: 5·10⁻⁵ and 0.6 K from the values printed to four decimals and 1 K);
// their own tolerance is wide enough for linear interpolation, which is not.
func fivesAreSummedWell(t *testing.T, nm, power []float64, p XY, kelvin float64) {
	if nm[1]-nm[0] != 5 {
		return
	}
	want, ok := map[float64]XY{2733: {0.4560, 0.4078}, 2998: {0.4357, 0.4012}, 5109: {0.3422, 0.3502}, 6598: {0.3118, 0.3236},
		2851: {0.4474, 0.4066}, 4070: {0.3781, 0.3775}}[math.Round(kelvin)]
	if !ok || math.Abs(p.X-want.X) > 1e-4 || math.Abs(p.Y-want.Y) > 1e-4 {
		t.Errorf("5 nm: %v, %.1f K", p, kelvin)
	}
}

// The observer's columns add up to what the dataset of CIE 018:2019 (DOI
// 10.25039/CIE.DS.xvudnb9b) states of itself.
func TestObserverAddsUp(t *testing.T) {
	t.Parallel()
	want := [3]float64{106.865469489595, 106.8569171011719, 106.892251278636}
	var got [3]float64
	for _, o := range observer {
		for i := range got {
			got[i] += o[i]
		}
	}
	for i := range got {
		if math.Abs(got[i]-want[i]) > 1e-6 {
			t.Errorf("column %d adds up to %.9f, want %.9f", i, got[i], want[i])
		}
	}
}

// White points of CIE 15:2018 to the five decimals printed; that of E is exact but
// for the observer's columns, which add up to a few 10⁻⁴ of each other.
func TestWhitePoints(t *testing.T) {
	t.Parallel()
	for name, tolerance := range map[string]float64{"D65": 5e-5, "A": 2e-5, "E": 5e-5} {
		s, err := Illuminant(name)
		if err != nil {
			t.Fatal(err)
		}
		want, _ := WhiteByName(name)
		if got := s.XYZ().XY(); got.distance(want) > tolerance {
			t.Errorf("%s: %v, want %v", name, got, want)
		}
	}
	if _, err := Illuminant("F2"); err == nil {
		t.Error("F2 is an illuminant here")
	}
}

// A second opinion: chromaticities of Gaussian lines summed with the 10 nm
// observer (2°) that the library python3-colormath 3.0.0 of Debian 12 carries. At
// 10 nm a sum over a line of 30 nm or more is within 2·10⁻⁴ of the 1 nm one.
func TestTenNanometreObserverAgrees(t *testing.T) {
	t.Parallel()
	const tolerance = 2e-4
	for _, c := range []struct {
		peak, fwhm float64
		want       XY
	}{{450, 30, XY{0.15348, 0.02229}}, {460, 40, XY{0.14123, 0.04422}}, {525, 40, XY{0.16071, 0.73977}}, {550, 60, XY{0.34146, 0.62972}}} {
		if got := gaussian(t, c.peak, c.fwhm, 1).XYZ().XY(); math.Abs(got.X-c.want.X) > tolerance || math.Abs(got.Y-c.want.Y) > tolerance {
			t.Errorf("%g nm, %g nm wide: %v, want %v", c.peak, c.fwhm, got, c.want)
		}
	}
}

// 683 lm/W at 555 nm is the definition of the candela.
func TestEfficacyOfMonochromaticLight(t *testing.T) {
	t.Parallel()
	eachCheck(t, "led_physics.json", "ler_monochromatic", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			NM float64 `json:"wavelength_nm"`
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		return map[string]float64{"lm_per_W": KM * LuminousEfficiency(in.NM)}
	})
	narrow, err := NewSpectrum([]float64{554, 554.9, 555, 555.1, 556}, []float64{0, 0, 1, 0, 0})
	if err != nil {
		t.Fatal(err)
	}
	if ler := narrow.LuminousEfficacy(); math.Abs(ler-683) > 0.05 {
		t.Errorf("at 555 nm: %g lm/W", ler)
	}
}

// Common practice: the eye is most sensitive near 0.55 µm and sees about 390 nm to
// 720 nm; a blue die must emit several times the watts of a yellow one to look as
// bright.
func TestEyeAsTheTradeKnowsIt(t *testing.T) {
	t.Parallel()
	best := 0.0
	for nm := 380.0; nm <= 780; nm++ {
		if LuminousEfficiency(nm) > LuminousEfficiency(best) {
			best = nm
		}
	}
	if math.Abs(best-550) > 10 || LuminousEfficiency(390) > 0.001 || LuminousEfficiency(720) > 0.0025 || LuminousEfficiency(400) == 0 {
		t.Errorf("most sensitive at %g nm; %g at 390 nm, %g at 720 nm", best, LuminousEfficiency(390), LuminousEfficiency(720))
	}
	if ratio := LuminousEfficiency(590) / LuminousEfficiency(465); ratio < 5 {
		t.Errorf("yellow is only %g times as efficacious as blue", ratio)
	}
	for nm := 625.0; nm <= 720; nm += 5 { // red
		p := Locus(nm)
		if p.X < 0.69 {
			t.Errorf("%g nm has x = %g", nm, p.X)
		}
	}
}

// columnsOf reads a CSV of numbers with a header row.
func columnsOf(t *testing.T, text []byte) (head []string, columns [][]float64) {
	t.Helper()
	r := csv.NewReader(bytes.NewReader(text))
	head, err := r.Read()
	if err != nil {
		t.Fatal(err)
	}
	columns = make([][]float64, len(head))
	for {
		row, err := r.Read()
		if err == io.EOF {
			return head, columns
		}
		if err != nil {
			t.Fatal(err)
		}
		for i, field := range row {
			v, err := strconv.ParseFloat(field, 64)
			if err != nil {
				v = math.NaN()
			}
			columns[i] = append(columns[i], v)
		}
	}
}

// Chromaticities of the CIE LED illuminants, to the digits printed in CIE 015:2018.
func TestLEDIlluminants(t *testing.T) {
	t.Parallel()
	text := sharedtest.Read(t, "data/cie/CIE_illum_LEDs_1nm.csv")
	_, columns := columnsOf(t, append([]byte("nm,B1,B2,B3,B4,B5,BH1,RGB1,V1,V2\n"), text...))
	want := map[int]XY{1: {0.45596, 0.40780}, 2: {0.43567, 0.40117}, 3: {0.37561, 0.37229}, 4: {0.34218, 0.35017}, 5: {0.31180, 0.32364},
		6: {0.44740, 0.40658}, 7: {0.45570, 0.42109}, 8: {0.45474, 0.40439}, 9: {0.37809, 0.37748}}
	for i, w := range want {
		s, err := NewSpectrum(columns[0], columns[i])
		if err != nil {
			t.Fatal(err)
		}
		if p := s.XYZ().XY(); math.Abs(p.X-w.X) > 1e-5 || math.Abs(p.Y-w.Y) > 1e-5 {
			t.Errorf("column %d: %.6f %.6f, want %v", i, p.X, p.Y, w)
		}
	}
}

// TestMeasuredSpectra holds 28 measured LED spectra against a reference
// calculation that stands beside them: 0.0001 in x, y; 0.05 nm in dominant
// wavelength.
func TestMeasuredSpectra(t *testing.T) {
	t.Parallel()
	rows, err := csv.NewReader(bytes.NewReader(sharedtest.Read(t, "data/led_spectra/reference.csv"))).ReadAll()
	if err != nil {
		t.Fatal(err)
	}
	for _, row := range rows[1:] {
		_, columns := columnsOf(t, sharedtest.Read(t, "data/led_spectra/"+row[0]+".csv"))
		first, last := sort.SearchFloat64s(columns[0], 300), sort.SearchFloat64s(columns[0], 900) // as the reference's centroid
		s, err := NewSpectrum(columns[0][first:last], columns[1][first:last])
		if err != nil {
			t.Errorf("%s: %v", row[0], err)
			continue
		}
		p := s.XYZ().XY()
		d, err := DominantOf(p, WhiteE)
		if err != nil {
			t.Errorf("%s: %v", row[0], err)
			continue
		}
		_, _, width, err := s.FWHM()
		if err != nil {
			t.Errorf("%s: %v", row[0], err)
		}
		for _, c := range []struct {
			name           string
			got, tolerance float64
			column         int
		}{
			{"raw peak", s.RawPeakNM(), 0.006, 1}, {"FWHM", width, 0.05, 2}, {"centroid", s.CentroidNM(), 0.05, 3},
			{"x", p.X, 0.0001, 4}, {"y", p.Y, 0.0001, 5}, {"dominant", d.WavelengthNM, 0.05, 6}, {"purity", d.ExcitationPurity, 0.0005, 7},
			{"efficacy", s.LuminousEfficacy(), 0.2, 8},
		} {
			want, err := strconv.ParseFloat(row[c.column], 64)
			if err != nil {
				t.Fatal(err)
			}
			if c.name == "dominant" && d.ExcitationPurity < 0.1 {
				continue // close to white a hundred-thousandth in x moves it more
			}
			if math.Abs(c.got-want) > c.tolerance {
				t.Errorf("%s: %s %.5f, want %.5f", row[0], c.name, c.got, want)
			}
		}
	}
}

// A Gaussian line gives its own peak between the points of any grid, where the
// highest point jumps; its FWHM is 2√(2 ln 2) of its standard deviation.
func TestPeakDoesNotJumpFromPixelToPixel(t *testing.T) {
	t.Parallel()
	for _, step := range []float64{0.45, 1, 2} {
		for _, peak := range []float64{455, 455.1, 455.23, 455.4} {
			s := gaussian(t, peak, 18, step)
			if got := s.PeakNM(); math.Abs(got-peak) > 0.001 {
				t.Errorf("step %g: peak %g, want %g", step, got, peak)
			}
			if _, _, width, err := s.FWHM(); err != nil || math.Abs(width-18) > 0.04*step*step {
				t.Errorf("step %g: FWHM %g %v", step, width, err)
			}
		}
	}
}

func gaussian(t *testing.T, peak, fwhm, step float64) *Spectrum {
	t.Helper()
	var nm, power []float64
	for w := 380.0; w <= 780; w += step {
		nm = append(nm, w)
		power = append(power, math.Exp(-4*math.Ln2*(w-peak)*(w-peak)/(fwhm*fwhm)))
	}
	s, err := NewSpectrum(nm, power)
	if err != nil {
		t.Fatal(err)
	}
	return s
}

// Summing a 5 nm spectrum with linear interpolation costs up to 2.7·10⁻⁴ in x, y;
// Sprague's formula must not, nor the monotone cubic on an irregular grid.
func TestCoarseSpectraAreInterpolated(t *testing.T) {
	t.Parallel()
	want := gaussian(t, 455, 20, 0.5).XYZ().XY()
	for _, step := range []float64{2, 5} {
		if got := gaussian(t, 455, 20, step).XYZ().XY(); got.distance(want) > 5e-5 {
			t.Errorf("step %g: %v, want %v", step, got, want)
		}
	}
	var nm, power []float64
	for i, w := 0, 380.0; w <= 780; i, w = i+1, w+2+float64(i%3) {
		nm = append(nm, w)
		power = append(power, math.Exp(-4*math.Ln2*(w-455)*(w-455)/400))
	}
	s, err := NewSpectrum(nm, power)
	if err != nil {
		t.Fatal(err)
	}
	if got := s.XYZ().XY(); got.distance(want) > 3e-4 {
		t.Errorf("irregular: %v, want %v", got, want)
	}
}
