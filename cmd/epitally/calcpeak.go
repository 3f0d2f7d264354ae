package main

import (
	"context"
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"os"

	"github.com/spf13/pflag"

	"epitally/analytics/colour"
)

// calcPeakModel fits how a recipe's dominant wavelength follows from its peak, and
// prints what the catalogue says of the recipe then.
func calcPeakModel(_ context.Context, c *console, args []string) error {
	var spectra []string
	var file, peak, dominant, delimiter string
	var asJSON bool
	f := pflag.NewFlagSet("calc peak-model", pflag.ContinueOnError)
	f.SortFlags = false
	f.StringArrayVar(&spectra, "spectrum", nil, "measured spectrum `file` of the recipe's dies (repeat): fits a line shape")
	f.StringVar(&file, "dies", "", "CSV `file` of dies measured both ways: fits dominant wavelength over peak")
	f.StringVar(&peak, "peak", "peak_wavelength_nm", "`column` of the peak, with --dies")
	f.StringVar(&dominant, "dominant", "dominant_wavelength_nm", "`column` of the dominant wavelength, with --dies")
	f.StringVar(&delimiter, "delimiter", ",", "field `separator` of --dies; \"tab\" for a tab")
	f.BoolVar(&asJSON, "json", false, "print JSON")
	if err := f.Parse(args); err != nil {
		return err
	}
	if f.NArg() > 0 || (len(spectra) > 0) == (file != "") {
		return errors.New("calc peak-model: give --spectrum FILE (repeat) or --dies FILE")
	}
	model, err := fitSpectra(c, spectra)
	if file != "" {
		model, err = fitDies(file, peak, dominant, delimiter)
	}
	if err != nil {
		return err
	}
	if asJSON {
		out := json.NewEncoder(c.out)
		out.SetIndent("", " ")
		return out.Encode(model)
	}
	fmt.Fprintf(c.out, "# %s\n# in the catalogue, under the recipe:\n", model.Describe())
	if model.Relation() {
		fmt.Fprintf(c.out, "colour: {reference_nm: %.2f, offset_nm: %.3f, slope: %.4f, residual_nm: %.3f, fitted_to: %s}\n", model.ReferenceNM, model.OffsetNM, model.Slope, model.ResidualNM, model.FittedTo)
		return nil
	}
	fmt.Fprintf(c.out, "colour: {model: %s, ratio: %.3f, short_tail: %.2f, long_tail: %.2f, residual_nm: %.3f, fitted_to: %s}\n", model.Model, model.Ratio, model.ShortTail, model.LongTail, model.ResidualNM, model.FittedTo)
	return nil
}

func fitSpectra(c *console, paths []string) (*colour.PeakModel, error) {
	if len(paths) == 0 {
		return nil, nil
	}
	var list []*colour.Spectrum
	for _, path := range paths {
		s, err := readSpectrum(c.in, path)
		if err != nil {
			return nil, err
		}
		list = append(list, s)
	}
	l, err := colour.FitLineShape(list)
	if err != nil {
		return nil, err
	}
	return &colour.PeakModel{Model: l.Name, Ratio: l.Ratio, ShortTail: l.ShortTail, LongTail: l.LongTail, ResidualNM: l.ResidualNM, FittedTo: l.FittedTo}, nil
}

func fitDies(path, peak, dominant, delimiter string) (*colour.PeakModel, error) {
	var values [2][]float64
	for i, column := range []string{peak, dominant} {
		in, err := os.Open(path)
		if err != nil {
			return nil, err
		}
		values[i], _, err = readColumn(in, summaryOptions{column: column, delimiter: delimiter}, nil)
		in.Close()
		if err != nil {
			return nil, fmt.Errorf("%s: %w", path, err)
		}
	}
	r, err := colour.FitPeakToDominant(values[0], values[1])
	if err != nil {
		return nil, fmt.Errorf("%s: %w", path, err)
	}
	return &colour.PeakModel{ReferenceNM: math.Round(r.ReferenceNM*100) / 100, OffsetNM: r.OffsetNM, Slope: r.Slope, ResidualNM: r.ResidualNM,
		FittedTo: fmt.Sprintf("%d dies", r.N)}, nil
}
