package api

import (
	"math"
	"net/http"
	"strings"
	"testing"

	"epitally/analytics/colour"
)

func TestColourIsCalculated(t *testing.T) {
	t.Parallel()
	f := setup(t)
	k := newContract(t, f)
	ask := func(body string) *http.Request {
		return request("POST", "/api/v1/calc/colour", body, "Content-Type", mediaJSON)
	}
	// x, y and dominant wavelength of a published check (reference calculation).
	got := decoded[colour.Answer](t, k.call(t, ask(`{"cie_x": 0.18745, "cie_y": 0.08486}`)))
	if got.DominantWavelengthNM == nil || math.Abs(*got.DominantWavelengthNM-455.0035) > 0.02 || math.Abs(*got.ExcitationPurity-0.80001) > 0.0005 || *got.Complementary {
		t.Errorf("%+v", got)
	}
	got = decoded[colour.Answer](t, k.call(t, ask(`{"peak_wavelength_nm": 455, "fwhm_nm": 19, "radiant_flux_mw": 90, "current_ma": 150, "forward_voltage_v": 3.2, "white": "D65"}`)))
	if got.WallPlugEfficiency == nil || math.Abs(*got.WallPlugEfficiency-0.1875) > 1e-9 || got.LuminousFluxLM == nil || *got.PeakWavelengthNM != 455 || got.Model == "" {
		t.Errorf("%+v", got)
	}
	got = decoded[colour.Answer](t, k.call(t, ask(`{"spectrum": {"wavelength_nm": [440, 445, 450, 455, 460, 465], "value": [0, 0.2, 0.9, 1, 0.3, 0]}, "white": [0.33, 0.33]}`)))
	if got.CentroidWavelengthNM == nil || got.FWHMNM == nil || got.CCTK != nil || len(got.Notes) != 1 {
		t.Errorf("%+v", got)
	}
	got = decoded[colour.Answer](t, k.call(t, ask(`{"cie_x": 0.16, "cie_y": 0.02, "radiant_flux_mw": 90, "current_ma": 150}`)))
	if got.ExternalQuantumEfficiency == nil || !strings.Contains(strings.Join(got.Notes, " "), "take the dominant wavelength") {
		t.Errorf("by x, y with a flux: %+v", got)
	}
	got = decoded[colour.Answer](t, k.call(t, ask(`{"cie_x": 0.3333, "cie_y": 0.3334}`)))
	if got.DominantWavelengthNM != nil || got.CCTK == nil || !strings.Contains(strings.Join(got.Notes, " "), "too near for a dominant wavelength") {
		t.Errorf("at white: %+v", got)
	}
	for body, want := range map[string]string{
		``:   "not the JSON expected",
		`{}`: "give one of spectrum",
		`{"cie_x": 0.3, "cie_y": 0.3, "peak_wavelength_nm": 450}`: "give one of spectrum",
		`{"cie_x": 0.3}`:                                                                           "cie_x and cie_y go together",
		`{"peak_wavelength_nm": 450}`:                                                              "peak_wavelength_nm and fwhm_nm go together",
		`{"cie_x": 0.3, "cie_y": 0}`:                                                               "y lies above 0",
		`{"cie_x": 0.3, "cie_y": 0.3, "model": "ohno"}`:                                            `model "ohno" is for peak_wavelength_nm`,
		`{"cie_x": 0.3, "cie_y": 0.3, "white": null}`:                                              `use "E", "D65", "A" or [x, y]`,
		`{"cie_x": 0.3, "cie_y": 0.3, "white": [0.31]}`:                                            `use "E", "D65", "A" or [x, y]`,
		`{"cie_x": 0.3, "cie_y": 0.3, "white": [0.31, 0.33, 5]}`:                                   `use "E", "D65", "A" or [x, y]`,
		`{"spectrum": {"wavelength_nm": [440, 450, 460, 470, 1e9], "value": [0, 1, 0, 0, 0]}}`:     "spectrum: row 5: 1e+09 is no wavelength in nm",
		`{"spectrum": {"wavelength_nm": [440, 450, 460, 470, 480], "value": [0, 1e308, 1, 0, 0]}}`: "no unit of power",
		`{"cie_x": 0.1, "cie_y": 0.9}`:                                                             "outside the spectral locus",
		`{"cie_x": 0.3, "cie_y": 0.3, "white": "F"}`:                                               `use "E", "D65", "A" or [x, y]`,
		`{"cie_x": 0.3, "cie_y": 0.3, "white": [0.8, 0.1]}`:                                        "on or outside the spectral locus",
		`{"peak_wavelength_nm": 450, "fwhm_nm": 18, "model": "bell"}`:                              "no line model is called",
		`{"peak_wavelength_nm": 450, "fwhm_nm": 18, "current_ma": -1}`:                             "current_ma -1",
		`{"cie_x": 0.3, "cie_y": 0.3, "colour": "red"}`:                                            "unknown field",
		`{"cie_x": 0.3, "cie_y": 0.3} {}`:                                                          "goes on after its JSON",
		`{"spectrum": {"wavelength_nm": [1, 2, 3], "value": [1, 2, 3]}}`:                           "3 points",
	} {
		if p := k.problem(t, ask(body), http.StatusBadRequest); !strings.Contains(p.Detail, want) {
			t.Errorf("%s: %q, want %q", body, p.Detail, want)
		}
	}
	k.problem(t, request("POST", "/api/v1/calc/colour", `{}`, "Content-Type", "text/plain"), http.StatusUnsupportedMediaType)
}
