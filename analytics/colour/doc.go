// Package colour is colorimetry and photometry of LED light: chromaticities,
// dominant wavelength, correlated colour temperature, line models and the
// efficiencies that follow from flux, wavelength, current and voltage.
//
// Everything is for the CIE 1931 standard observer (2°). Wavelengths are in nm in
// air. White is equal-energy E unless said otherwise. K_m = 683 lm/W.
//
// Between the wavelengths of its 1 nm table (CIE 018:2019) the observer is taken
// as linear, so that the spectral locus there is a chord.
//
// NaN is "no value": functions over dies give NaN where a reading is missing or
// where the answer has no meaning, and functions over one value say why in an
// error that wraps ErrNotMeaningful or analytics.ErrInvalid.
package colour
