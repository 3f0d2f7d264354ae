package simfab

import "epitally/analytics/wafermap"

// Product is what die is made from a wafer, as the demo's catalogue lists it.
type Product struct {
	Name           string
	Layout         wafermap.Layout
	DriveCurrentMA float64
	lots           string  // first letter of its lots
	firstLot       int     // number of its first lot
	flatMM         float64 // length of the flat; 0 = a notch too small to cost a die
	light          float64 // typical light output at the drive current, in the unit of its recipe
}

// Recipe is what was meant to grow.
type Recipe struct {
	Name             string
	PLPeakNM         float64 // target of the photoluminescence peak
	PLWindowNM       float64 // allowed deviation of a wafer's mean, either side
	DominantNM       float64 // target of the dominant wavelength under current
	DominantWindowNM float64
	optics           optics
}

// optics holds the magnitudes of one colour. Spectral figures follow measured
// packaged LEDs of that colour; the rest is common practice.
type optics struct {
	nmPerDegC      float64 // shift to shorter wavelengths per °C hotter
	bowDegC        float64 // centre minus edge, typical
	tiltDegC       float64
	edgeDegC       float64 // colder at the very edge, decaying inwards
	coarse, fine   float64 // texture, °C sd
	waferDegC      float64 // wafer to wafer, sd
	runNM          float64 // run to run, sd
	emissionNM     float64 // emission peak under current − photoluminescence peak
	emissionSD     float64 // its wafer-to-wafer scatter
	offsetAt       float64 // peak at which dominant − peak is offsetNM
	offsetNM       float64
	offsetSlope    float64 // change of the offset per nm of peak
	offsetSD       float64 // its wafer-to-wafer scatter
	fwhmNM         float64
	fwhmSlope      float64 // per nm of peak
	voltage        float64 // typical forward voltage, V
	lowVoltage     float64 // the same at 10 µA
	voltageSlope   float64 // V per nm of peak: photon energy, and in red the alloy
	lightUnit      string  // quantity of the light output
	lightSlope     float64 // relative change of light output per nm of dominant wavelength
	lightPrecision int     // decimals the station writes
	colorimeter    bool    // the prober reads x and y too
}

// dominantOffset is dominant − peak wavelength at an emission peak, nm.
func (o *optics) dominantOffset(peakNM float64) float64 {
	return o.offsetNM + o.offsetSlope*(peakNM-o.offsetAt)
}

// ring is a ring of pockets on a carrier; pockets count from 1 in each ring.
type ring struct {
	name    string
	pockets int
	degC    float64 // typical offset of the ring
}

// reactorPlan is one reactor of the scenario.
type reactorPlan struct {
	name     string
	recipe   string
	products []string // the first is the usual one, the second every eighth run
	carriers []string // the second goes in half way, or with the maintenance
	rings    []ring
	partial  int // wafers per run that is not fully loaded
	firstRun int
	mapper   string
	prober   string
	other    string // another prober that takes every fourth wafer; "" = none

	walkNM     float64 // drift per run, from walkFrom of all runs on
	walkFrom   float64
	stepNM     float64 // step at a maintenance, at stepAt of all runs
	stepAt     float64
	longRingNM float64 // extra offset of the outermost ring in the third run
}

func products() []Product {
	layout := func(name string, diameter, px, py float64) wafermap.Layout {
		return wafermap.Layout{Name: name, WaferDiameterMM: diameter, DiePitchXMM: px, DiePitchYMM: py, EdgeExclusionMM: 3,
			Mark: "notch", MarkAngleDeg: 270, XAxis: "right", YAxis: "up", CentreY: 0.5}
	}
	small := func(name string, px, py, cx, cy float64) wafermap.Layout {
		l := layout(name, 100, px, py)
		l.EdgeExclusionMM, l.Mark, l.CentreX, l.CentreY = 2, "flat", cx, cy
		return l
	}
	fell := small("fell-56x76", 0.56, 0.76, 90.5, 65.5)
	fell.YAxis = "down"
	return []Product{
		{Name: "tarn-105", Layout: layout("tarn-105x105", 150, 1.05, 1.05), DriveCurrentMA: 350, lots: "K", firstLot: 409, light: 520},
		{Name: "tarn-56", Layout: layout("tarn-56x76", 150, 0.56, 0.76), DriveCurrentMA: 150, lots: "L", firstLot: 57, light: 214},
		{Name: "fell-56", Layout: fell, DriveCurrentMA: 150, lots: "G", firstLot: 118, flatMM: 32.5, light: 210},
		{Name: "moss-76", Layout: small("moss-76x76", 0.76, 0.76, 0.5, 0.5), DriveCurrentMA: 200, lots: "M", firstLot: 231, flatMM: 32.5, light: 42},
		{Name: "rowan-105", Layout: small("rowan-105x105", 1.05, 1.05, 0.5, 0.5), DriveCurrentMA: 350, lots: "R", firstLot: 76, flatMM: 32.5, light: 38},
	}
}

func recipes() []Recipe {
	return []Recipe{
		{Name: "blue-455", PLPeakNM: 452.4, PLWindowNM: 2.5, DominantNM: 455, DominantWindowNM: 2.5, optics: optics{
			nmPerDegC: 1.25, bowDegC: 4.4, tiltDegC: 0.8, edgeDegC: 4, coarse: 0.35, fine: 0.15, waferDegC: 0.4, runNM: 0.3,
			emissionNM: -1.5, emissionSD: 0.6, offsetAt: 451, offsetNM: 4.05, offsetSlope: -0.15, offsetSD: 0.1,
			fwhmNM: 18.8, fwhmSlope: 0.12, voltage: 3.12, lowVoltage: 2.31, voltageSlope: -0.006,
			lightUnit: "radiant_flux_mw", lightSlope: -0.008, lightPrecision: 2}},
		{Name: "green-525", PLPeakNM: 524.4, PLWindowNM: 4, DominantNM: 525, DominantWindowNM: 4, optics: optics{
			nmPerDegC: 2, bowDegC: -6.3, tiltDegC: 1, edgeDegC: 3.5, coarse: 0.6, fine: 0.2, waferDegC: 0.45, runNM: 0.6,
			emissionNM: -5, emissionSD: 0.9, offsetAt: 519, offsetNM: 5.6, offsetSlope: 0.05, offsetSD: 0.25,
			fwhmNM: 33, fwhmSlope: 0.15, voltage: 3.24, lowVoltage: 2.12, voltageSlope: -0.0038,
			lightUnit: "luminous_flux_lm", lightSlope: 0.003, lightPrecision: 3, colorimeter: true}},
		{Name: "red-625", PLPeakNM: 636.4, PLWindowNM: 2.5, DominantNM: 625, DominantWindowNM: 2, optics: optics{
			nmPerDegC: 0.6, bowDegC: 5, tiltDegC: 1.2, edgeDegC: 3, coarse: 0.6, fine: 0.25, waferDegC: 0.8, runNM: 0.3,
			emissionNM: 1, emissionSD: 0.5, offsetAt: 629, offsetNM: -10, offsetSlope: -0.286, offsetSD: 0.3,
			fwhmNM: 16.6, fwhmSlope: 0.05, voltage: 2.12, lowVoltage: 1.66, voltageSlope: -0.014,
			lightUnit: "luminous_flux_lm", lightSlope: -0.016, lightPrecision: 3}},
	}
}

func reactorPlans() []reactorPlan {
	return []reactorPlan{
		{name: "Heron", recipe: "blue-455", products: []string{"tarn-105", "tarn-56"}, carriers: []string{"HC-2"},
			rings: []ring{{"outer", 7, 0.15}, {"centre", 1, -1.05}}, partial: 3, firstRun: 196,
			mapper: "mapper-1", prober: "prober-1", walkNM: 0.16, walkFrom: 0.41},
		{name: "Gannet", recipe: "blue-455", products: []string{"fell-56"}, carriers: []string{"GC-1", "GC-4"},
			rings: []ring{{"outer", 10, -0.4}, {"inner", 4, 1.0}}, partial: 2, firstRun: 388,
			mapper: "mapper-1", prober: "prober-2", other: "prober-3", stepNM: 2.3, stepAt: 0.6, longRingNM: 4},
		{name: "Tern", recipe: "green-525", products: []string{"moss-76"}, carriers: []string{"TC-3", "TC-5"},
			rings: []ring{{"outer", 10, -0.3}, {"inner", 4, 0.75}}, partial: 2, firstRun: 142,
			mapper: "mapper-2", prober: "prober-2"},
		{name: "Petrel", recipe: "red-625", products: []string{"rowan-105"}, carriers: []string{"PC-1"},
			rings: []ring{{"outer", 9, -0.4}, {"inner", 3, 1.2}}, partial: 2, firstRun: 71,
			mapper: "mapper-2", prober: "prober-2"},
	}
}
