package colour

import (
	"encoding/json"
	"math"
	"strings"
	"testing"
)

func TestPhysicsChecks(t *testing.T) {
	t.Parallel()
	eachCheck(t, "led_physics.json", "photon_energy", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			NM float64 `json:"wavelength_nm"`
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		return map[string]float64{"eV": PhotonEnergyEV(in.NM)}
	})
	eachCheck(t, "led_physics.json", "lambert_flux", func(t *testing.T, input json.RawMessage) map[string]float64 {
		var in struct {
			Axial float64 `json:"axial_intensity_cd"`
			Half  float64 `json:"half_angle_deg"`
		}
		if err := json.Unmarshal(input, &in); err != nil {
			t.Fatal(err)
		}
		m := LambertianOrder(in.Half)
		return map[string]float64{"order_m": m, "flux_lm": FluxFromAxialIntensity(in.Axial, m)}
	})
}

// Common practice: a photon's energy in eV is about 1.24 over the wavelength in µm;
// InGaN blue turns on near 2.9 V, well above red; a Lambertian source's flux is π
// times its axial intensity.
func TestWhatTheTradeKnows(t *testing.T) {
	t.Parallel()
	if e := PhotonEnergyEV(1000); math.Abs(e-1.24) > 0.001 {
		t.Errorf("1 µm: %g eV", e)
	}
	if blue, red := PhotonEnergyEV(450), PhotonEnergyEV(630); math.Abs(blue-2.9) > 0.2 || blue-red < 0.7 {
		t.Errorf("blue %g eV, red %g eV", blue, red)
	}
	if i := AxialIntensityFromFlux(math.Pi, LambertianOrder(60)); math.Abs(i-1) > 1e-12 {
		t.Errorf("π lm: %g cd", i)
	}
	if !math.IsNaN(LambertianOrder(90)) || !math.IsNaN(LambertianOrder(0)) {
		t.Error("a half angle of 0° or 90° has an order")
	}
}

// 90 mW at 455 nm, 150 mA and 3.2 V, in the range of a chip's data sheet: 0.1875 of
// the power, and 90·455/(150·1239.84) of the electrons.
func TestEfficiencies(t *testing.T) {
	t.Parallel()
	if w := WallPlugEfficiency(90, 150, 3.2); math.Abs(w-0.1875) > 1e-12 {
		t.Errorf("wall plug %g", w)
	}
	if q := ExternalQuantumEfficiency(90, 455, 150); math.Abs(q-0.220189) > 1e-5 {
		t.Errorf("quantum %g", q)
	}
	for _, v := range []float64{WallPlugEfficiency(90, 0, 3.2), WallPlugEfficiency(90, 150, 0), ExternalQuantumEfficiency(90, 455, math.NaN())} {
		if !math.IsNaN(v) {
			t.Errorf("without current or voltage: %g", v)
		}
	}
	if f := RadiantFluxMW(LuminousFluxLM(90, 43.3), 43.3); math.Abs(f-90) > 1e-12 {
		t.Errorf("there and back: %g mW", f)
	}
}

func repeat(v float64, n int) []float64 {
	out := make([]float64, n)
	for i := range out {
		out[i] = v
	}
	return out
}

func TestSuspects(t *testing.T) {
	t.Parallel()
	const n = 1000
	sound := DieReadings{RadiantFluxMW: repeat(90, n), WavelengthNM: repeat(455, n), ForwardVoltageV: repeat(3.2, n), CurrentMA: 150}
	shorted := sound
	shorted.ForwardVoltageV = append(repeat(3.2, n-15), repeat(0.2, 15)...) // 1.5 % shorts are a wafer's, not the tester's
	micro := sound
	micro.RadiantFluxMW = repeat(90_000, n)
	milli := sound
	milli.ForwardVoltageV = repeat(0.0032, n)
	milli.RadiantFluxMW = nil
	noCurrent := micro
	noCurrent.CurrentMA = math.NaN()
	for _, c := range []struct {
		name string
		in   DieReadings
		want string
	}{
		{"sound", sound, ""},
		{"a few shorts", shorted, ""},
		{"flux in µW", micro, "quantum efficiency above 1; wall-plug efficiency above 1"},
		{"voltage in mV", milli, "voltage below the photon's energy"},
		{"no current stated", noCurrent, ""},
		{"nothing", DieReadings{CurrentMA: math.NaN()}, ""},
	} {
		var kinds []string
		for _, s := range CheckDies(c.in) {
			kinds = append(kinds, string(s.Kind))
			if s.Says == "" || s.LikelyCause == "" || s.Of != n || s.Dies != n {
				t.Errorf("%s: %+v", c.name, s)
			}
		}
		if got := strings.Join(kinds, "; "); got != c.want {
			t.Errorf("%s: %q, want %q", c.name, got, c.want)
		}
	}
	// 90 W at 455 nm and 150 mA: 90000·455/(150·1239.84) photons an electron; 90 W of 0.48 W.
	for i, want := range []string{"1,000 of 1,000 dies: more photons come out than electrons go in at 150 mA (quantum efficiency 220.19)",
		"1,000 of 1,000 dies: more light comes out than power goes in at 150 mA (wall-plug efficiency 187.50)"} {
		if says := CheckDies(micro)[i].Says; says != want {
			t.Errorf("%q, want %q", says, want)
		}
	}
	// 3.2 mV at 455 nm, whose photon has 2.725 eV.
	if says := CheckDies(milli)[0].Says; says != "1,000 of 1,000 dies: the forward voltage is only 0.00 of the photon's energy" {
		t.Errorf("%q", says)
	}
}

// The height of an integrating sphere from 9 cm to 11 cm costs 20 % of flux (doi
// 10.1109/CSTIC.2015.7153449): voltage and wavelength know nothing of it.
func TestFluxThatChangesAlone(t *testing.T) {
	t.Parallel()
	const n = 100
	before := DieReadings{RadiantFluxMW: repeat(90, n), WavelengthNM: repeat(455, n), ForwardVoltageV: repeat(3.2, n), CurrentMA: 150}
	after := before
	after.RadiantFluxMW = repeat(72, n)
	if s := CompareMeasurements(before, after); len(s) != 1 || s[0].Kind != FluxAlone || !strings.Contains(s[0].Says, "×0.80") {
		t.Errorf("%+v", s)
	}
	aged, otherCurrent, steady := after, after, before
	aged.WavelengthNM, otherCurrent.CurrentMA, steady.RadiantFluxMW = repeat(456, n), 120, repeat(88, n)
	for name, a := range map[string]DieReadings{"wavelength moved too": aged, "another current": otherCurrent, "small change": steady, "no flux": {}} {
		if s := CompareMeasurements(before, a); s != nil {
			t.Errorf("%s: %+v", name, s)
		}
	}
}
