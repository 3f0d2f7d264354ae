package colour

import (
	"fmt"
	"math"
)

// Question is what Describe answers: exactly one of Spectrum, XY and Peak is given.
type Question struct {
	Spectrum *Spectrum
	XY       *XY
	Peak     *PeakQuestion
	White    XY // of the dominant wavelength

	RadiantFluxMW float64 // NaN: not known
	CurrentMA     float64 // NaN: not known
	VoltageV      float64 // NaN: not known
}

// PeakQuestion is a line by its peak and width under a model.
type PeakQuestion struct {
	PeakNM, FWHMNM float64
	Model          LineModel
}

// Answer is everything that follows. A nil number does not follow from what was
// given, or has no meaning there; Notes say which and why.
type Answer struct {
	DominantWavelengthNM      *float64  `json:"dominant_wavelength_nm"`
	Complementary             *bool     `json:"complementary"`
	ExcitationPurity          *float64  `json:"excitation_purity"`
	CIEX                      float64   `json:"cie_x"`
	CIEY                      float64   `json:"cie_y"`
	CIEUPrime                 float64   `json:"cie_u_prime"`
	CIEVPrime                 float64   `json:"cie_v_prime"`
	PeakWavelengthNM          *float64  `json:"peak_wavelength_nm"`
	CentroidWavelengthNM      *float64  `json:"centroid_wavelength_nm"`
	FWHMNM                    *float64  `json:"fwhm_nm"`
	LuminousEfficacyLMPerW    *float64  `json:"luminous_efficacy_lm_per_w"`
	LuminousFluxLM            *float64  `json:"luminous_flux_lm"`
	AxialIntensityCD          *float64  `json:"axial_intensity_cd"` // of a Lambertian source
	CCTK                      *float64  `json:"cct_k"`
	Duv                       *float64  `json:"duv"`
	PhotonEnergyEV            *float64  `json:"photon_energy_ev"`
	WallPlugEfficiency        *float64  `json:"wall_plug_efficiency"`
	ExternalQuantumEfficiency *float64  `json:"external_quantum_efficiency"`
	Model                     string    `json:"model"` // the line model; "" = none was used
	Notes                     []string  `json:"notes"`
	Suspects                  []Suspect `json:"suspects"`
}

// Describe works out everything that follows from a spectrum, a chromaticity, or a
// peak and width. Errors are those of the parts and wrap analytics.ErrInvalid.
func Describe(q Question) (Answer, error) {
	a := Answer{Notes: []string{}, Suspects: []Suspect{}}
	if q.Spectrum == nil && q.XY == nil && q.Peak == nil {
		return a, invalid("neither a spectrum, a chromaticity nor a peak is given")
	}
	s := q.Spectrum
	if p := q.Peak; p != nil {
		if err := p.Model.Check(); err != nil {
			return a, err
		}
		var err error
		if s, err = p.Model.Spectrum(p.PeakNM, p.FWHMNM); err != nil {
			return a, err
		}
		a.Model = p.Model.Describe()
		if p.Model.FittedTo != "" && (p.PeakNM < LowestDefaultNM || p.PeakNM > HighestDefaultNM) {
			a.Notes = append(a.Notes, fmt.Sprintf("the line model was fitted to peaks from %d nm to %d nm: here its tails decide, which nobody has measured", LowestDefaultNM, HighestDefaultNM))
		}
	}
	xy := q.XY
	if s != nil {
		p := s.XYZ().XY()
		xy = &p
	}
	if err := a.chromaticity(*xy, q.White); err != nil {
		return a, err
	}
	wavelength := math.NaN()
	if s != nil {
		a.shape(s, q.Peak)
		wavelength = *a.CentroidWavelengthNM
	} else {
		a.Notes = append(a.Notes, "peak, centroid, width and luminous efficacy do not follow from x and y alone")
		if a.DominantWavelengthNM != nil && !*a.Complementary {
			wavelength = *a.DominantWavelengthNM
		}
	}
	a.efficiencies(q, wavelength)
	if s == nil && a.ExternalQuantumEfficiency != nil {
		a.Notes = append(a.Notes, "photon energy and external quantum efficiency take the dominant wavelength for that of the photons")
	}
	return a, nil
}

// Describe names the model with its error.
func (m LineModel) Describe() string {
	text := m.Name
	if m.FittedTo != "" {
		text += ", fitted to " + m.FittedTo
	}
	if m.ResidualNM > 0 {
		text += fmt.Sprintf(", residual ±%.2g nm", m.ResidualNM)
	}
	return text
}

func (a *Answer) chromaticity(p, white XY) error {
	uv := p.UV()
	a.CIEX, a.CIEY, a.CIEUPrime, a.CIEVPrime = p.X, p.Y, uv.U, uv.V
	d, err := DominantOf(p, white)
	switch why, meaningless := Meaningless(err); {
	case meaningless:
		a.Notes = append(a.Notes, "dominant wavelength: "+why)
	case err != nil:
		return err
	default:
		a.DominantWavelengthNM, a.Complementary, a.ExcitationPurity = &d.WavelengthNM, &d.Complementary, &d.ExcitationPurity
	}
	c, err := CCTOf(p)
	switch why, meaningless := Meaningless(err); {
	case meaningless:
		a.Notes = append(a.Notes, "colour temperature: "+why)
	case err != nil:
		return err
	default:
		a.CCTK, a.Duv = &c.K, &c.Duv
	}
	return nil
}

// shape takes what follows from the spectrum; of a line, peak and width are those
// asked for.
func (a *Answer) shape(s *Spectrum, line *PeakQuestion) {
	peak, centroid, efficacy := s.PeakNM(), s.CentroidNM(), s.LuminousEfficacy()
	a.PeakWavelengthNM, a.CentroidWavelengthNM, a.LuminousEfficacyLMPerW = &peak, &centroid, &efficacy
	if line != nil {
		a.PeakWavelengthNM, a.FWHMNM = &line.PeakNM, &line.FWHMNM
		return
	}
	if _, _, width, err := s.FWHM(); err == nil {
		a.FWHMNM = &width
	} else if why, is := Meaningless(err); is {
		a.Notes = append(a.Notes, "width: "+why)
	}
}

func (a *Answer) efficiencies(q Question, wavelengthNM float64) {
	set := func(to **float64, v float64) {
		if !math.IsNaN(v) && !math.IsInf(v, 0) {
			*to = &v
		}
	}
	set(&a.PhotonEnergyEV, PhotonEnergyEV(wavelengthNM))
	if a.LuminousEfficacyLMPerW != nil {
		set(&a.LuminousFluxLM, LuminousFluxLM(q.RadiantFluxMW, *a.LuminousEfficacyLMPerW))
	}
	if a.LuminousFluxLM != nil {
		set(&a.AxialIntensityCD, AxialIntensityFromFlux(*a.LuminousFluxLM, 1))
	}
	set(&a.WallPlugEfficiency, WallPlugEfficiency(q.RadiantFluxMW, q.CurrentMA, q.VoltageV))
	set(&a.ExternalQuantumEfficiency, ExternalQuantumEfficiency(q.RadiantFluxMW, wavelengthNM, q.CurrentMA))
	a.Suspects = append(a.Suspects, CheckDies(DieReadings{RadiantFluxMW: []float64{q.RadiantFluxMW}, WavelengthNM: []float64{wavelengthNM},
		ForwardVoltageV: []float64{q.VoltageV}, CurrentMA: q.CurrentMA})...)
	if q.RadiantFluxMW > 0 && !(q.CurrentMA > 0) {
		a.Notes = append(a.Notes, "the efficiencies need a current; wall-plug efficiency needs a voltage too")
	}
}
