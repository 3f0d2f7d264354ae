package colour

import "math"

// photonEVNM is hc/e in eV·nm (CODATA 2018; exact in the SI of 2019 to the digits
// given).
const photonEVNM = 1239.841984

// PhotonEnergyEV is the energy of a photon in eV: hc/(eλ), about 1.24 over the
// wavelength in µm.
func PhotonEnergyEV(wavelengthNM float64) float64 { return photonEVNM / wavelengthNM }

// LuminousFluxLM is luminous flux in lm from radiant flux in mW and the luminous
// efficacy of its radiation in lm/W.
func LuminousFluxLM(radiantFluxMW, efficacyLMPerW float64) float64 {
	return radiantFluxMW * 1e-3 * efficacyLMPerW
}

// RadiantFluxMW is its inverse.
func RadiantFluxMW(luminousFluxLM, efficacyLMPerW float64) float64 {
	return luminousFluxLM / efficacyLMPerW * 1e3
}

// LambertianOrder is the order m of a source whose intensity falls as cosᵐ θ and is
// half of the axial one at the half angle in degrees: −ln 2 / ln cos θ½; 1 for the
// 60° of a Lambertian source. Outside 0° to 90° it is NaN.
func LambertianOrder(halfAngleDeg float64) float64 {
	if !(halfAngleDeg > 0 && halfAngleDeg < 90) {
		return math.NaN()
	}
	return -math.Ln2 / math.Log(math.Cos(halfAngleDeg*math.Pi/180))
}

// FluxFromAxialIntensity is the flux in lm of a source of axial intensity in cd and
// order m into the half space: 2πI₀/(m + 1), so π times the axial intensity for a
// Lambertian source.
func FluxFromAxialIntensity(axialIntensityCD, order float64) float64 {
	return 2 * math.Pi * axialIntensityCD / (order + 1)
}

// AxialIntensityFromFlux is its inverse, in cd.
func AxialIntensityFromFlux(luminousFluxLM, order float64) float64 {
	return luminousFluxLM * (order + 1) / (2 * math.Pi)
}

// WallPlugEfficiency is radiant flux over electrical power: Φ/(I·V); NaN unless
// current and voltage are above 0.
func WallPlugEfficiency(radiantFluxMW, currentMA, voltageV float64) float64 {
	if !(currentMA > 0 && voltageV > 0) {
		return math.NaN()
	}
	return radiantFluxMW / (currentMA * voltageV)
}

// ExternalQuantumEfficiency is photons out per electron in: Φ·λ/(I·hc/e); NaN
// unless the current is above 0.
func ExternalQuantumEfficiency(radiantFluxMW, wavelengthNM, currentMA float64) float64 {
	if !(currentMA > 0) {
		return math.NaN()
	}
	return radiantFluxMW * wavelengthNM / (currentMA * photonEVNM)
}

// WallPlugEfficiencies is WallPlugEfficiency of every die; all slices have the same
// length.
func WallPlugEfficiencies(dst, radiantFluxMW, voltageV []float64, currentMA float64) {
	for i := range dst {
		dst[i] = WallPlugEfficiency(radiantFluxMW[i], currentMA, voltageV[i])
	}
}

// ExternalQuantumEfficiencies is ExternalQuantumEfficiency of every die; all slices
// have the same length.
func ExternalQuantumEfficiencies(dst, radiantFluxMW, wavelengthNM []float64, currentMA float64) {
	for i := range dst {
		dst[i] = ExternalQuantumEfficiency(radiantFluxMW[i], wavelengthNM[i], currentMA)
	}
}
