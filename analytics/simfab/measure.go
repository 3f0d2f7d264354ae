package simfab

import (
	"math"
	"math/rand/v2"
)

// A prober stops at these: an open die shows the voltage limit, a shorted one
// the current limit.
const (
	limitV  = 6.0
	limitUA = 20.0
)

// grown is one wafer while it is measured: the wafer-level draws and the
// smooth fields over it.
type grown struct {
	w      *Wafer
	o      *optics
	r      *rand.Rand
	d      *dice
	damage damage

	meanNM             float64 // of the photoluminescence peak, before bowl and texture
	bowNM, edgeNM      float64
	tiltXNM, tiltYNM   float64 // per mm
	emissionNM         float64
	offsetNM           float64 // this wafer's deviation from dominant − peak
	fwhmNM             float64
	voltage, light     float64
	brightness         float64 // photoluminescence intensity, a.u.
	coarse, fine       *field
	electric, luminous *field
	badlySeated        bool
	shiftXMM, shiftYMM float64
	hue                *hue // nil: the prober reads no x and y
}

// Measure gives what the mapper and the prober read on wafer i, and records the
// wafer's truth. Calls for different wafers may run at the same time.
func (f *Fab) Measure(i int) (pl, probe *Reading) {
	g := f.grow(&f.Wafers[i])
	w := g.w
	t := WaferTruth{Wafer: w.Name, Reactor: w.Run.Reactor, Run: w.Run.Number, Carrier: w.Run.Carrier, Ring: w.Ring, Pocket: w.Pocket,
		Clusters: g.damage.clusters, Scratches: g.damage.scratches, Chipped: g.damage.chipped, StoppedEarly: g.damage.strip,
		BadlySeated: g.badlySeated, OffCentreXMM: g.shiftXMM, OffCentreYMM: g.shiftYMM}
	pl = &Reading{Wafer: w, Kind: "pl", Station: w.Mapper, MeasuredAt: w.MappedAt, Layout: &w.Product.Layout}
	probe = &Reading{Wafer: w, Kind: "probe", Station: w.Prober, MeasuredAt: w.ProbedAt, Layout: &w.Product.Layout,
		DriveCurrentMA: w.Product.DriveCurrentMA}
	pl.Columns = columns(len(g.d.x), "peak_wavelength_nm", 2, "fwhm_nm", 2, "pl_intensity", 1)
	probe.Columns = columns(len(g.d.x), "forward_voltage_v", 3, "low_current_forward_voltage_v", 3, "reverse_current_ua", 3,
		g.o.lightUnit, g.o.lightPrecision, "dominant_wavelength_nm", 2)
	if g.o.colorimeter {
		probe.Columns = append(probe.Columns, columns(len(g.d.x), "cie_x", 4, "cie_y", 4)...)
		g.hue = f.hues[w.Recipe.Name]
	}
	pl.X, pl.Y = g.d.x, g.d.y
	n := float64(len(g.d.x))
	for _, row := range g.d.rows {
		for _, s := range []*field{g.coarse, g.fine, g.electric, g.luminous} {
			s.setRow(row.yMM)
		}
		for k := row.first; k < row.first+row.n; k++ {
			peak := g.peak(k, row.yMM)
			emission := peak + g.emissionNM
			dominant := emission + g.o.dominantOffset(emission) + g.offsetNM
			t.MeanPeakNM += peak / n
			t.MeanDominantNM += dominant / n
			g.readPL(pl, k, peak, f.stations[w.Mapper])
			if g.damage.absent[k] {
				t.Absent++
				continue
			}
			probe.X, probe.Y = append(probe.X, g.d.x[k]), append(probe.Y, g.d.y[k])
			switch g.readProbe(probe, k, emission, dominant, f.stations[w.Prober]) {
			case open:
				t.Opens++
			case short:
				t.Shorts++
			case leaky:
				t.Leaky++
			}
		}
	}
	t.Dies = len(probe.X)
	f.truth[i] = t
	return pl, probe
}

func columns(n int, spec ...any) (cs []Column) {
	for i := 0; i < len(spec); i += 2 {
		cs = append(cs, Column{Quantity: spec[i].(string), Decimals: spec[i+1].(int), K: make([]int32, 0, n)})
	}
	return cs
}

// grow draws everything of a wafer that is not per die.
func (f *Fab) grow(w *Wafer) *grown {
	r := stream(f.config.Seed, forWafer, uint64(w.index))
	o := &w.Recipe.optics
	g := &grown{w: w, o: o, r: r, d: f.dice[w.Product.Name]}
	degC := w.Run.carrier.degC[w.pocket] + o.waferDegC*r.NormFloat64()
	tilt, phase := o.tiltDegC*(1+0.25*r.NormFloat64()), w.Run.carrier.tilt[w.pocket]+0.3*r.NormFloat64()
	bow := o.bowDegC * (1 + 0.15*r.NormFloat64())
	if g.badlySeated = r.Float64() < 0.02; g.badlySeated { // one side of the wafer stands off the pocket
		tilt, degC = 5*tilt, degC-1.2
	}
	g.meanNM = w.Recipe.PLPeakNM - o.nmPerDegC*degC + w.Run.OffsetNM
	if p := w.Run.plan; p.longRingNM != 0 && w.outermost && w.Run.index == longRingRun {
		g.meanNM += p.longRingNM
	}
	g.bowNM, g.edgeNM = o.nmPerDegC*bow, o.nmPerDegC*o.edgeDegC*(1+0.2*r.NormFloat64())
	g.tiltXNM = -o.nmPerDegC * tilt * math.Cos(phase) / g.d.radiusMM
	g.tiltYNM = -o.nmPerDegC * tilt * math.Sin(phase) / g.d.radiusMM
	g.emissionNM = o.emissionNM + o.emissionSD*r.NormFloat64()
	g.offsetNM = o.offsetSD * r.NormFloat64()
	g.fwhmNM = o.fwhmNM * (1 + 0.02*r.NormFloat64())
	g.voltage, g.light = o.voltage+0.012*r.NormFloat64(), w.Product.light*(1+0.02*r.NormFloat64())
	g.brightness = 1200 * (1 + 0.05*r.NormFloat64())
	g.coarse, g.fine = newField(r, g.d.radiusMM, 9), newField(r, g.d.radiusMM, 2)
	g.electric, g.luminous = newField(r, g.d.radiusMM, 12), newField(r, g.d.radiusMM, 8)
	if w.offCentre {
		g.shiftXMM, g.shiftYMM = 2.6, -1.7
		g.d = newDice(w.Product, g.shiftXMM, g.shiftYMM)
	}
	g.damage = newDamage(r, g.d, w.Product)
	return g
}

// longRingRun is the run, from 0, whose outermost ring went wrong.
const longRingRun = 2

// peak is the photoluminescence peak of die k, nm, in a row whose fields are set.
func (g *grown) peak(k int, yMM float64) float64 {
	d, x := g.d, g.d.xMM[k]
	texture := g.o.coarse*g.coarse.at(x) + g.o.fine*g.fine.at(x)
	return g.meanNM + g.bowNM*(d.rho2[k]-0.5) + g.tiltXNM*x + g.tiltYNM*yMM +
		g.edgeNM*(d.rim[k]+0.5*d.flat[k]) + g.o.nmPerDegC*texture
}

// readPL adds what the mapper reads on die k. It loses a die in ten thousand.
func (g *grown) readPL(m *Reading, k int, peak float64, s station) {
	r := g.r
	if r.Uint32()%10000 == 0 {
		m.put(0, math.NaN())
		m.put(1, math.NaN())
		m.put(2, math.NaN())
		return
	}
	fwhm := g.fwhmNM + g.o.fwhmSlope*(peak-g.w.Recipe.PLPeakNM) + 0.15*g.fine.at(g.d.xMM[k])
	intensity := g.brightness * (1 + 2*g.o.lightSlope*(peak-g.w.Recipe.PLPeakNM) + 0.05*g.luminous.at(g.d.xMM[k]) - 0.25*g.d.rim[k])
	m.put(0, peak+s.wavelengthNM+0.08*r.NormFloat64())
	m.put(1, fwhm+0.12*r.NormFloat64())
	m.put(2, intensity*(1-0.5*float64(g.damage.hazard[k]))*(1+0.01*r.NormFloat64()))
}

// readProbe adds what the prober reads on die k: forward voltage, the same at
// low current, reverse current, light output, dominant wavelength.
func (g *grown) readProbe(m *Reading, k int, emission, dominant float64, s station) fate {
	r, x := g.r, g.d.xMM[k]
	off := emission - (g.w.Recipe.PLPeakNM + g.o.emissionNM)
	fate := g.damage.draw(r, k, g.d.rim[k])
	switch fate {
	case open:
		m.putAll(limitV, limitV, 0, math.NaN(), math.NaN())
		g.readHue(m, math.NaN())
		return fate
	case short:
		m.putAll(0.05+1.4*r.Float64()*r.Float64(), 0.002+0.05*r.Float64(), limitUA, math.NaN(), math.NaN())
		g.readHue(m, math.NaN())
		return fate
	}
	leak := -2.75 + 0.22*r.NormFloat64() // log10 of µA
	if fate == leaky {
		leak += 1.2 * math.Abs(r.NormFloat64())
	}
	reverse := min(math.Pow(10, leak), limitUA)
	smooth := g.electric.at(x)
	voltage := g.voltage + g.o.voltageSlope*off + 0.028*smooth + 0.06*g.d.rim[k] + s.voltageV + 0.003*r.NormFloat64()
	low := g.o.lowVoltage + 0.8*g.o.voltageSlope*off + 0.008*smooth + s.voltageV + 0.002*r.NormFloat64()
	if reverse > 0.05 { // the leak takes its share of 10 µA
		low -= 0.18 * math.Log10(reverse/0.05)
	}
	light := g.light * (1 + g.o.lightSlope*(dominant-g.w.Recipe.DominantNM) + 0.04*g.luminous.at(x) -
		0.02*(g.d.rho2[k]-0.5) - 0.2*g.d.rim[k]) * (1 + s.lightRatio) * (1 + 0.008*r.NormFloat64())
	m.putAll(voltage, low, reverse, light, dominant+s.wavelengthNM+0.08*r.NormFloat64())
	g.readHue(m, dominant+s.wavelengthNM)
	return fate
}

// readHue adds x and y of a die of that dominant wavelength, where the prober
// reads them; NaN = the die does not light.
func (g *grown) readHue(m *Reading, dominantNM float64) {
	if g.hue == nil {
		return
	}
	x, y := math.NaN(), math.NaN()
	if dominantNM == dominantNM {
		x, y = g.hue.at(dominantNM)
		x, y = x+hueNoise*g.r.NormFloat64(), y+hueNoise*g.r.NormFloat64()
	}
	m.put(5, x)
	m.put(6, y)
}

// hueNoise is the standard deviation of one reading of x and of y (common
// practice: a few units of the fourth decimal).
const hueNoise = 0.0006

func (m *Reading) putAll(values ...float64) {
	for c, v := range values {
		m.put(c, v)
	}
}

// put appends a value to a column as the station writes it; NaN is no value.
func (m *Reading) put(c int, v float64) {
	col := &m.Columns[c]
	k := int32(NoValue)
	if v == v {
		k = int32(math.Floor(v*scales[col.Decimals] + 0.5))
	}
	col.K = append(col.K, k)
}

var scales = [...]float64{1, 10, 100, 1000, 10_000}
