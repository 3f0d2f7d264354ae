package api

import (
	"encoding/json"
	"errors"
	"fmt"
	"math"
	"mime"
	"net/http"
	"strings"

	"github.com/labstack/echo/v4"

	"epitally/analytics"
	"epitally/analytics/colour"
)

// colourIn is the body of the colour calculation: exactly one of a spectrum, a
// chromaticity, and a peak with its width.
type colourIn struct {
	Spectrum         *spectrumIn     `json:"spectrum,omitempty"`
	CIEX             *float64        `json:"cie_x,omitempty"`
	CIEY             *float64        `json:"cie_y,omitempty"`
	PeakWavelengthNM *float64        `json:"peak_wavelength_nm,omitempty" doc:"with fwhm_nm"`
	FWHMNM           *float64        `json:"fwhm_nm,omitempty"`
	Model            string          `json:"model,omitempty" doc:"line model; else the one fitted to measured LEDs of the colour"`
	White            json.RawMessage `json:"white,omitempty" doc:"E, D65, A or [x, y]; else E"`
	RadiantFluxMW    *float64        `json:"radiant_flux_mw,omitempty"`
	CurrentMA        *float64        `json:"current_ma,omitempty"`
	ForwardVoltageV  *float64        `json:"forward_voltage_v,omitempty"`
}

type spectrumIn struct {
	WavelengthNM []float64 `json:"wavelength_nm" doc:"ascending, at any step"`
	Value        []float64 `json:"value" doc:"power per nm, in any unit"`
}

func (s *Server) calcColour(c echo.Context, _ noParams) error {
	var in colourIn
	if err := readJSON(c, &in); err != nil {
		return err
	}
	q, err := in.question()
	if err != nil {
		return err
	}
	a, err := colour.Describe(q)
	if err != nil {
		return err
	}
	return answerJSON(c, http.StatusOK, mediaJSON, a)
}

func (in *colourIn) question() (q colour.Question, err error) {
	q.RadiantFluxMW, q.CurrentMA, q.VoltageV = orNaN(in.RadiantFluxMW), orNaN(in.CurrentMA), orNaN(in.ForwardVoltageV)
	for _, v := range []struct {
		name  string
		value float64
	}{{"radiant_flux_mw", q.RadiantFluxMW}, {"current_ma", q.CurrentMA}, {"forward_voltage_v", q.VoltageV}} {
		if v.value < 0 {
			return q, fmt.Errorf("%s %g: give a number not below 0: %w", v.name, v.value, analytics.ErrInvalid)
		}
	}
	if q.White, err = in.white(); err != nil {
		return q, err
	}
	byXY, byPeak := in.CIEX != nil || in.CIEY != nil, in.PeakWavelengthNM != nil || in.FWHMNM != nil
	switch {
	case (in.Spectrum != nil) == byXY && byXY == byPeak, in.Spectrum != nil && (byXY || byPeak), byXY && byPeak:
		return q, fmt.Errorf("give one of spectrum, cie_x with cie_y, and peak_wavelength_nm with fwhm_nm: %w", analytics.ErrInvalid)
	case in.Model != "" && !byPeak:
		return q, fmt.Errorf("model %q is for peak_wavelength_nm with fwhm_nm: %w", in.Model, analytics.ErrInvalid)
	case byXY && (in.CIEX == nil || in.CIEY == nil):
		return q, fmt.Errorf("cie_x and cie_y go together: %w", analytics.ErrInvalid)
	case byPeak && (in.PeakWavelengthNM == nil || in.FWHMNM == nil):
		return q, fmt.Errorf("peak_wavelength_nm and fwhm_nm go together: %w", analytics.ErrInvalid)
	case in.Spectrum != nil:
		if q.Spectrum, err = colour.NewSpectrum(in.Spectrum.WavelengthNM, in.Spectrum.Value); err != nil {
			err = fmt.Errorf("spectrum: %w", err)
		}
	case byXY:
		q.XY = &colour.XY{X: *in.CIEX, Y: *in.CIEY}
	default:
		q.Peak = &colour.PeakQuestion{PeakNM: *in.PeakWavelengthNM, FWHMNM: *in.FWHMNM}
		if q.Peak.Model = colour.DefaultLineModel(q.Peak.PeakNM); in.Model != "" {
			q.Peak.Model, err = colour.LineModelByName(in.Model)
		}
	}
	return q, err
}

func (in *colourIn) white() (colour.XY, error) {
	if len(in.White) == 0 {
		return colour.WhiteE, nil
	}
	var name string
	if json.Unmarshal(in.White, &name) == nil {
		if w, ok := colour.WhiteByName(name); ok {
			return w, nil
		}
	}
	var p []float64
	if json.Unmarshal(in.White, &p) == nil && len(p) == 2 {
		return colour.XY{X: p[0], Y: p[1]}, nil
	}
	return colour.XY{}, fmt.Errorf(`white %s: use "E", "D65", "A" or [x, y]: %w`, in.White, analytics.ErrInvalid)
}

func orNaN(v *float64) float64 {
	if v == nil {
		return math.NaN()
	}
	return *v
}

// readJSON reads a JSON body; unknown keys are refused.
func readJSON(c echo.Context, to any) error {
	media, _, err := mime.ParseMediaType(c.Request().Header.Get("Content-Type"))
	if err != nil || media != mediaJSON {
		return echo.NewHTTPError(http.StatusUnsupportedMediaType, fmt.Sprintf("the body is sent as %q; send JSON as Content-Type: %s", c.Request().Header.Get("Content-Type"), mediaJSON))
	}
	d := json.NewDecoder(c.Request().Body)
	d.DisallowUnknownFields()
	err = d.Decode(to)
	var over *http.MaxBytesError
	switch {
	case errors.As(err, &over):
		return fmt.Errorf("the body is over %d bytes: %w", over.Limit, analytics.ErrTooLarge)
	case err != nil:
		return fmt.Errorf("the body is not the JSON expected: %s: %w", strings.TrimPrefix(err.Error(), "json: "), analytics.ErrInvalid)
	case d.More():
		return fmt.Errorf("the body goes on after its JSON: %w", analytics.ErrInvalid)
	}
	return nil
}
