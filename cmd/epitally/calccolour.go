package main

import (
	"context"
	"encoding/csv"
	"encoding/json"
	"errors"
	"fmt"
	"io"
	"math"
	"os"
	"strconv"
	"strings"
	"text/tabwriter"

	"github.com/spf13/pflag"

	"epitally/analytics/colour"
)

// colourOptions are the flags of calc colour.
type colourOptions struct {
	spectrum, xy           string
	peak, fwhm             float64
	model, white           string
	flux, current, voltage float64
	json                   bool
}

func calcColour(_ context.Context, c *console, args []string) error {
	o := colourOptions{}
	f := pflag.NewFlagSet("calc colour", pflag.ContinueOnError)
	f.SortFlags = false
	f.SetOutput(c.err)
	f.StringVar(&o.spectrum, "spectrum", "", "CSV `file` of wavelength in nm and power, with or without a header; - for standard input")
	f.StringVar(&o.xy, "xy", "", "chromaticity `X,Y` (CIE 1931)")
	f.Float64Var(&o.peak, "peak", math.NaN(), "peak wavelength in `nm`, with --fwhm")
	f.Float64Var(&o.fwhm, "fwhm", math.NaN(), "full width at half maximum in `nm`, with --peak")
	f.StringVar(&o.model, "model", "", "line `model` for --peak: "+strings.Join(colour.LineModelNames(), ", ")+" (default: fitted to measured LEDs of the colour)")
	f.StringVar(&o.white, "white", "E", "`white` of the dominant wavelength: E, D65, A or X,Y")
	f.Float64Var(&o.flux, "radiant-flux", math.NaN(), "radiant flux in `mW`")
	f.Float64Var(&o.current, "current", math.NaN(), "drive current in `mA`")
	f.Float64Var(&o.voltage, "voltage", math.NaN(), "forward voltage in `V`")
	f.BoolVar(&o.json, "json", false, "print JSON")
	numbers := []string{"peak", "fwhm", "radiant-flux", "current", "voltage"}
	for _, name := range numbers {
		f.Lookup(name).DefValue = "0" // help names no default: NaN is "not given"
	}
	if err := f.Parse(args); err != nil {
		return err
	}
	for _, name := range numbers {
		if text := f.Lookup(name).Value.String(); f.Changed(name) && text == "NaN" {
			return fmt.Errorf("--%s %s: give a number, or leave the flag out", name, text)
		}
	}
	if f.NArg() > 0 {
		return fmt.Errorf("calc colour: %q is not a flag; see calc colour --help", f.Arg(0))
	}
	q, err := o.question(c.in)
	if err != nil {
		return err
	}
	a, err := colour.Describe(q)
	if err != nil {
		return err
	}
	if o.json {
		out := json.NewEncoder(c.out)
		out.SetIndent("", " ")
		return out.Encode(a)
	}
	return printColour(c.out, a)
}

func (o colourOptions) question(stdin io.Reader) (q colour.Question, err error) {
	q.RadiantFluxMW, q.CurrentMA, q.VoltageV = o.flux, o.current, o.voltage
	for _, v := range []struct {
		name  string
		value float64
	}{{"--radiant-flux", o.flux}, {"--current", o.current}, {"--voltage", o.voltage}} {
		if math.IsInf(v.value, 0) || v.value < 0 {
			return q, fmt.Errorf("%s %g: give a number not below 0", v.name, v.value)
		}
	}
	if q.White, err = whiteNamed(o.white); err != nil {
		return q, err
	}
	byPeak := !math.IsNaN(o.peak) || !math.IsNaN(o.fwhm)
	given := 0
	for _, is := range []bool{o.spectrum != "", o.xy != "", byPeak} {
		if is {
			given++
		}
	}
	switch {
	case given != 1:
		return q, errors.New("calc colour: give one of --spectrum FILE, --xy X,Y and --peak P --fwhm F")
	case o.model != "" && !byPeak:
		return q, errors.New("calc colour: --model is for --peak and --fwhm")
	case byPeak && math.IsNaN(o.peak+o.fwhm):
		return q, errors.New("calc colour: --peak and --fwhm go together")
	case o.spectrum != "":
		q.Spectrum, err = readSpectrum(stdin, o.spectrum)
	case o.xy != "":
		var p colour.XY
		if p, err = pointIn(o.xy); err != nil {
			err = fmt.Errorf("--xy: %w", err)
		}
		q.XY = &p
	default:
		q.Peak = &colour.PeakQuestion{PeakNM: o.peak, FWHMNM: o.fwhm, Model: colour.DefaultLineModel(o.peak)}
		if o.model != "" {
			q.Peak.Model, err = colour.LineModelByName(o.model)
		}
	}
	return q, err
}

// whiteNamed reads a white by letter or as X,Y.
func whiteNamed(text string) (colour.XY, error) {
	if w, ok := colour.WhiteByName(text); ok {
		return w, nil
	}
	p, err := pointIn(text)
	if err != nil {
		return p, fmt.Errorf("--white: %q is not E, D65, A or X,Y", text)
	}
	return p, nil
}

func pointIn(text string) (p colour.XY, err error) {
	x, y, ok := strings.Cut(text, ",")
	if p.X, err = strconv.ParseFloat(strings.TrimSpace(x), 64); err == nil {
		p.Y, err = strconv.ParseFloat(strings.TrimSpace(y), 64)
	}
	if !ok || err != nil {
		return p, fmt.Errorf("%q is not X,Y such as 0.15,0.03", text)
	}
	return p, nil
}

// maxSpectrumBytes bounds a spectrum's file.
const maxSpectrumBytes = 16 << 20

// readSpectrum reads two columns of numbers, a header row allowed, separated by
// commas, semicolons, tabs or blanks.
func readSpectrum(stdin io.Reader, path string) (*colour.Spectrum, error) {
	in := stdin
	if path != "-" {
		file, err := os.Open(path)
		if err != nil {
			return nil, err
		}
		defer file.Close()
		in = file
	}
	text, err := io.ReadAll(io.LimitReader(in, maxSpectrumBytes+1))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	if len(text) > maxSpectrumBytes {
		return nil, fmt.Errorf("%s: over %d bytes, too long for a spectrum", path, maxSpectrumBytes)
	}
	nm, power, err := spectrumRows(strings.TrimPrefix(string(text), "\ufeff"))
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	s, err := colour.NewSpectrum(nm, power)
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return s, nil
}

func spectrumRows(text string) (nm, power []float64, err error) {
	r := csv.NewReader(strings.NewReader(text))
	r.Comment, r.FieldsPerRecord, r.TrimLeadingSpace = '#', -1, true
	first, _, _ := strings.Cut(text, "\n")
	for _, sep := range ";\t" {
		if strings.ContainsRune(first, sep) {
			r.Comma = sep
		}
	}
	for row := 0; ; row++ {
		fields, err := r.Read()
		if err == io.EOF {
			return nm, power, nil
		}
		if err != nil {
			return nil, nil, err
		}
		line, _ := r.FieldPos(0)
		if len(fields) < 2 {
			if fields = strings.Fields(fields[0]); len(fields) < 2 {
				return nil, nil, fmt.Errorf("line %d: one column where wavelength and power are expected", line)
			}
		}
		w, errW := strconv.ParseFloat(strings.TrimSpace(fields[0]), 64)
		p, errP := strconv.ParseFloat(strings.TrimSpace(fields[1]), 64)
		switch {
		case errW != nil && row == 0: // a header
		case errW != nil:
			return nil, nil, fmt.Errorf("line %d: %q is no wavelength", line, fields[0])
		case errP != nil:
			return nil, nil, fmt.Errorf("line %d: %q is no power", line, fields[1])
		default:
			nm, power = append(nm, w), append(power, p)
		}
	}
}

// printColour writes what is known as an aligned table.
func printColour(w io.Writer, a colour.Answer) error {
	t := tabwriter.NewWriter(w, 0, 0, 2, ' ', 0)
	line := func(label string, v *float64, decimals int, unit string) {
		if v != nil {
			fmt.Fprintf(t, "%s\t%.*f\t%s\n", label, decimals, *v, unit)
		}
	}
	name := "dominant wavelength"
	if a.Complementary != nil && *a.Complementary {
		name = "complementary wavelength"
	}
	line(name, a.DominantWavelengthNM, 3, "nm")
	line("excitation purity", a.ExcitationPurity, 5, "")
	line("CIE x", &a.CIEX, 6, "")
	line("CIE y", &a.CIEY, 6, "")
	line("CIE u′", &a.CIEUPrime, 6, "")
	line("CIE v′", &a.CIEVPrime, 6, "")
	line("peak wavelength", a.PeakWavelengthNM, 3, "nm")
	line("centroid wavelength", a.CentroidWavelengthNM, 3, "nm")
	line("spectral width (FWHM)", a.FWHMNM, 3, "nm")
	line("luminous efficacy of radiation", a.LuminousEfficacyLMPerW, 2, "lm/W")
	line("luminous flux", a.LuminousFluxLM, 4, "lm")
	line("axial intensity, Lambertian", a.AxialIntensityCD, 4, "cd")
	line("correlated colour temperature", a.CCTK, 1, "K")
	line("D_uv", a.Duv, 6, "")
	line("photon energy", a.PhotonEnergyEV, 4, "eV")
	line("wall-plug efficiency", a.WallPlugEfficiency, 4, "")
	line("external quantum efficiency", a.ExternalQuantumEfficiency, 4, "")
	if a.Model != "" {
		fmt.Fprintf(t, "line model\t%s\t\n", a.Model)
	}
	if err := t.Flush(); err != nil {
		return err
	}
	for _, n := range a.Notes {
		fmt.Fprintf(w, "note: %s\n", n)
	}
	for _, s := range a.Suspects {
		fmt.Fprintf(w, "suspect: %s; look at %s\n", s.Says, s.LikelyCause)
	}
	return nil
}
