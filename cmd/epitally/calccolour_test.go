package main

import (
	"bytes"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"
	"path/filepath"
	"strings"
	"testing"

	"github.com/spf13/pflag"

	"epitally/analytics/colour"
	"epitally/jobs/reader"
)

func calcColourOf(t *testing.T, stdin string, args ...string) (string, error) {
	t.Helper()
	var out bytes.Buffer
	err := calcColour(t.Context(), &console{in: strings.NewReader(stdin), out: &out, err: &out}, args)
	return out.String(), err
}

func TestCalcColourHasItsKeys(t *testing.T) {
	t.Parallel()
	out, err := calcColourOf(t, "", "--peak", "455", "--fwhm", "20", "--model", "gaussian", "--radiant-flux", "90", "--current", "150", "--voltage", "3.2", "--json")
	if err != nil {
		t.Fatal(err)
	}
	var got map[string]any
	if err := json.Unmarshal([]byte(out), &got); err != nil {
		t.Fatal(err)
	}
	for _, key := range []string{"dominant_wavelength_nm", "excitation_purity", "cie_x", "cie_y", "cie_u_prime", "cie_v_prime", "peak_wavelength_nm", "centroid_wavelength_nm",
		"fwhm_nm", "luminous_efficacy_lm_per_w", "luminous_flux_lm", "wall_plug_efficiency", "external_quantum_efficiency"} {
		if _, ok := got[key].(float64); !ok {
			t.Errorf("%s is %v", key, got[key])
		}
	}
	if got["complementary"] != false || got["cct_k"] != nil || got["duv"] != nil || got["model"] != "gaussian" {
		t.Errorf("%v %v %v %v", got["complementary"], got["cct_k"], got["duv"], got["model"])
	}
	if w := got["wall_plug_efficiency"].(float64); math.Abs(w-0.1875) > 1e-9 { // 90 mW / (150 mA · 3.2 V)
		t.Errorf("wall-plug efficiency %g", w)
	}
}

// A spectrum may come with or without a header, by any separator, on standard
// input or as a file.
func TestCalcColourReadsSpectra(t *testing.T) {
	t.Parallel()
	rows := []string{"440,0", "445,0.2", "450,0.9", "455,1", "460,0.3", "465,0"}
	plain := strings.Join(rows, "\n")
	path := filepath.Join(t.TempDir(), "line.csv")
	if err := os.WriteFile(path, []byte("wavelength_nm,value\n"+plain+"\n"), 0o600); err != nil {
		t.Fatal(err)
	}
	want, err := calcColourOf(t, "", "--spectrum", path, "--json")
	if err != nil {
		t.Fatal(err)
	}
	for name, text := range map[string]string{"bare": plain, "semicolons": strings.ReplaceAll(plain, ",", ";"), "tabs": "nm\tW\n" + strings.ReplaceAll(plain, ",", "\t"),
		"blanks": strings.ReplaceAll(plain, ",", "  "), "remarks": "# a lamp\n" + plain} {
		if got, err := calcColourOf(t, text, "--spectrum", "-", "--json"); err != nil || got != want {
			t.Errorf("%s: %v\n%s", name, err, got)
		}
	}
}

func TestCalcColourRefuses(t *testing.T) {
	t.Parallel()
	for _, c := range []struct{ args, stdin, want string }{
		{"", "", "give one of --spectrum FILE"},
		{"--xy 0.3,0.3 --peak 450 --fwhm 20", "", "give one of"},
		{"--xy 0.3", "", "is not X,Y"},
		{"--xy 0.3,0", "", "y lies above 0"},
		{"--xy 0.3,NaN", "", "not finite"},
		{"--peak 450 --fwhm 20 --model bell", "", "use gaussian, ohno"},
		{"--peak 450", "", "--peak and --fwhm go together"},
		{"--peak 450 --fwhm 0", "", "full width at half maximum"},
		{"--peak 450 --fwhm 20 --current NaN", "", "--current NaN: give a number"},
		{"--xy 0.3,0.3 --voltage +Inf", "", "--voltage +Inf"},
		{"--spectrum -", "440,0\n450,1\n460,0\n470,0\n1e9,0\n", "row 5: 1e+09 is no wavelength in nm"},
		{"--xy 0.3,0.3 --model ohno", "", "--model is for --peak"},
		{"--xy 0.3,0.3 --white pink", "", "is not E, D65, A or X,Y"},
		{"--xy 0.3,0.3 --white 0.05,0.05", "", "on or outside the spectral locus"},
		{"--xy 0.3,0.3 --current -1", "", "--current -1"},
		{"--xy 0.3,0.3 more", "", `"more" is not a flag`},
		{"--spectrum /nowhere/at-all.csv", "", "no such file"},
		{"--spectrum -", "440,0\n445,x\n", `line 2: "x" is no power`},
		{"--spectrum -", "440,0\n445\n", "line 2: one column"},
		{"--spectrum -", "440,0\n450,1\n445,1\n455,0\n460,0\n", "row 3: wavelength 445 nm does not follow 450 nm"},
		{"--spectrum -", "440,1\n450,1\n460,0.1\n470,0\n480,0\n", "begins at 440 nm"},
	} {
		out, err := calcColourOf(t, c.stdin, strings.Fields(c.args)...)
		if err == nil || !strings.Contains(err.Error(), c.want) {
			t.Errorf("%s: %v, want %q\n%s", c.args, err, c.want, out)
		}
	}
}

// Deep red as it is printed is red, and a deep-red line's x + y of 1 and a bit in the
// last place is no reason to refuse it.
func TestCalcColourOfDeepRed(t *testing.T) {
	t.Parallel()
	for _, args := range []string{"--xy 0.7347,0.2653", "--peak 697 --fwhm 5", "--peak 740 --fwhm 25 --model gaussian"} {
		out, err := calcColourOf(t, "", append(strings.Fields(args), "--json")...)
		if err != nil {
			t.Errorf("%s: %v", args, err)
			continue
		}
		var got colour.Answer
		if err := json.Unmarshal([]byte(out), &got); err != nil {
			t.Fatal(err)
		}
		if *got.Complementary || *got.DominantWavelengthNM < 680 || *got.DominantWavelengthNM > 700 {
			t.Errorf("%s: %g nm, complementary %t", args, *got.DominantWavelengthNM, *got.Complementary)
		}
	}
}

func TestCalcColourHelpNamesUnits(t *testing.T) {
	t.Parallel()
	_, help, err := runCommand(t, "calc", "colour", "--help")
	if !errors.Is(err, pflag.ErrHelp) {
		t.Fatal(err)
	}
	for _, want := range []string{"radiant flux in mW", "drive current in mA", "forward voltage in V", "wavelength in nm"} {
		if !strings.Contains(help, want) {
			t.Errorf("help lacks %q:\n%s", want, help)
		}
	}
	if strings.Contains(help, "NaN") {
		t.Errorf("help speaks of NaN:\n%s", help)
	}
}

// The relation is found again from dies drawn by it, and the catalogue reads what
// is printed.
func TestCalcPeakModel(t *testing.T) {
	t.Parallel()
	rows := "peak_wavelength_nm,dominant_wavelength_nm\n"
	for i := range 200 {
		p := 448 + 0.05*float64(i)
		rows += fmt.Sprintf("%.2f,%.3f\n", p, p+4-0.1*(p-453))
	}
	file := filepath.Join(t.TempDir(), "dies.csv")
	if err := os.WriteFile(file, []byte(rows), 0o600); err != nil {
		t.Fatal(err)
	}
	out, _, err := runCommand(t, "calc", "peak-model", "--dies", file)
	if err != nil || !strings.Contains(out, "offset_nm: 4.0") || !strings.Contains(out, "slope: -0.1000") || !strings.Contains(out, "fitted_to: 200 dies") {
		t.Fatalf("%v: %s", err, out)
	}
	line := out[strings.LastIndex(strings.TrimSpace(out), "\n")+1:]
	c, err := reader.ParseCatalogue([]byte("catalogue: c\nrecipes:\n  - recipe: blue\n    " + line))
	if err != nil || c.Recipes[0].Colour == nil || c.Recipes[0].Colour.Slope != -0.1 {
		t.Errorf("the catalogue does not read it: %v\n%s", err, line)
	}
	spectrum := filepath.Join(t.TempDir(), "line.csv")
	s, err := colour.DefaultLineModel(455).Spectrum(455, 19)
	if err != nil {
		t.Fatal(err)
	}
	text := ""
	for nm := 380; nm <= 700; nm++ {
		text += fmt.Sprintf("%d,%.6f\n", nm, colour.DefaultLineModel(455).Power(float64(nm), s.PeakNM(), 19))
	}
	if err := os.WriteFile(spectrum, []byte(text), 0o600); err != nil {
		t.Fatal(err)
	}
	if out, _, err = runCommand(t, "calc", "peak-model", "--spectrum", spectrum); err != nil || !strings.Contains(out, "colour: {model: split-pearson, ratio: ") {
		t.Errorf("%v: %s", err, out)
	}
	for _, bad := range [][]string{{}, {"--dies", file, "--spectrum", spectrum}, {"--dies", "/nowhere.csv"}, {"--dies", file, "--peak", "none"}} {
		if _, _, err := runCommand(t, append([]string{"calc", "peak-model"}, bad...)...); err == nil {
			t.Errorf("%v is taken", bad)
		}
	}
}
