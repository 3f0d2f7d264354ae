package web

import (
	"fmt"
	"hash/fnv"
	"math"
	"time"

	"epitally/analytics/binning"
	"epitally/analytics/quantity"
	"epitally/analytics/uniformity"
	"epitally/analytics/wafermap"
)

// Canned data: one invented wafer and what stands round it. Everything is a
// formula, so that the gallery looks the same every time.
var (
	galleryZone = time.FixedZone("CET", 3600)
	galleryNow  = time.Date(2026, 11, 30, 5, 12, 0, 0, galleryZone)
)

func dated(b Base) Base {
	b.MadeAt, b.URL = Moment(galleryNow, galleryZone), "/"
	return b
}

// noise is a repeatable number in [−1, 1) for a die and a purpose.
func noise(x, y int16, purpose string) float64 {
	h := fnv.New64a()
	fmt.Fprintf(h, "%d %d %s", x, y, purpose)
	return float64(h.Sum64()>>11)/(1<<52) - 1
}

func cannedLayout() *wafermap.Layout {
	return &wafermap.Layout{Name: "harbour-100", WaferDiameterMM: 100, DiePitchXMM: 0.72, DiePitchYMM: 0.72, EdgeExclusionMM: 2, Mark: "flat", MarkAngleDeg: 270, XAxis: "right", YAxis: "down"}
}

func cannedGrid(l *wafermap.Layout) *wafermap.Grid {
	g, reach := &wafermap.Grid{}, int16(l.WaferDiameterMM/l.DiePitchXMM/2)+1
	for y := -reach; y <= reach; y++ {
		for x := -reach; x <= reach; x++ {
			xMM, yMM := l.PositionMM(int(x), int(y))
			if l.Inside(int(x), int(y)) && yMM > -46.6 && math.Hypot(xMM-20, yMM-26) > 1.5 {
				g.X, g.Y = append(g.X, x), append(g.Y, y)
			}
		}
	}
	return g
}

// cannedPlane is a bowl with a tilt and an edge that runs long, with a cluster
// of dead dies; the other quantities follow it loosely.
func cannedPlane(name string, g *wafermap.Grid, l *wafermap.Layout) wafermap.Plane {
	p := wafermap.Plane{Quantity: name, Encoding: wafermap.Int16, K16: make([]int16, g.Len())}
	for i := range p.K16 {
		x, y := l.PositionMM(int(g.X[i]), int(g.Y[i]))
		r := math.Hypot(x, y)
		off := 0.4 - 1.6*(1-r*r/2500) + x/60 + 3.4*math.Pow(r/48, 9) + 0.35*noise(g.X[i], g.Y[i], "wavelength")
		var k float64
		switch name {
		case "dominant_wavelength_nm":
			p.BaseK, p.Exponent, k = 45500, -2, 100*off
		case "forward_voltage_v":
			p.BaseK, p.Exponent, k = 3000, -3, 110-18*off+14*noise(g.X[i], g.Y[i], "voltage")
		default:
			p.BaseK, p.Exponent, k = 20000, -2, 900-140*off+250*noise(g.X[i], g.Y[i], "flux")
		}
		p.K16[i] = int16(math.Round(k))
		if math.Hypot(x+18, y-14) < 3.2+2*noise(g.X[i], g.Y[i], "dead") {
			p.K16[i] = wafermap.Missing16
		}
	}
	return p
}

func cannedWafer() WaferInput {
	l := cannedLayout()
	g := cannedGrid(l)
	run, grown, current := 204, galleryNow.Add(-31*time.Hour), 20.0
	m := MeasurementInput{ID: 17, Kind: "probe", Station: "probe-2", MeasuredAt: galleryNow.Add(-50 * time.Minute), DriveCurrentMA: &current, Dies: g.Len(), Remeasured: 12,
		Current: true, SourceID: 41, Layout: l, Facts: map[string]string{"operator_shift": "night"}}
	old := m
	old.ID, old.Kind, old.MeasuredAt, old.Current = 12, "pl", galleryNow.Add(-20*time.Hour), true
	in := WaferInput{Wafer: "K-0412-07", Measurement: &m, All: []MeasurementInput{m, old}, Grid: g, Zone: galleryZone, GridURL: "/api/v1/grids/0",
		Growth: Growth{Lot: "K-0412", Reactor: "Heron", Run: &run, GrownAt: &grown, Carrier: "C3", Ring: "outer", Pocket: "7", Recipe: "harbour-455", Product: "harbour"}}
	frame := uniformity.NewFrame(g, l)
	for _, name := range []string{"dominant_wavelength_nm", "forward_voltage_v", "radiant_flux_mw"} {
		q, _ := quantity.Lookup(name)
		plane, target, window := cannedPlane(name, g, l), math.NaN(), 0.0
		if q.Scale == quantity.Deviation {
			target, window = 455, 1.5
		}
		in.Planes = append(in.Planes, Plotted{Quantity: q, Summary: frame.Summarise(&plane, q, target), Target: target, Window: window})
	}
	in.Spec = cannedBins(g, l)
	in.SpecChoices = []Option{{"harbour-blue", "harbour-blue v3", true}, {"quay-wide", "quay-wide v1", false}}
	return in
}

// cannedBins sorts the canned dies into bins of 1 nm by 0.05 V.
func cannedBins(g *wafermap.Grid, l *wafermap.Layout) *SpecInput {
	s := &SpecInput{Name: "harbour-blue", Version: 3, Latest: true, OverLayout: true, Confident: -1, Denominator: l.Dies(), Codes: make([]uint16, g.Len())}
	for _, volts := range []string{"V1", "V2", "V3"} {
		for _, colour := range []string{"B1", "B2", "B3", "B4"} {
			s.Cells = append(s.Cells, binning.Cell{Name: colour + "-" + volts, Class: binning.Sellable})
		}
	}
	s.Cells = append(s.Cells, binning.Cell{Name: "off-colour short", Class: binning.Reject}, binning.Cell{Name: "off-colour long", Class: binning.Reject},
		binning.Cell{Name: "voltage too high", Class: binning.Reject}, binning.Cell{Name: "untested", Class: binning.Untested})
	s.Counts = make([]int, len(s.Cells))
	wave, volt := cannedPlane("dominant_wavelength_nm", g, l), cannedPlane("forward_voltage_v", g, l)
	for i := range s.Codes {
		w, v := wave.Value(i), volt.Value(i)
		var code int
		switch {
		case math.IsNaN(w) || math.IsNaN(v):
			code = 15
		case w < 453.5:
			code = 12
		case w >= 456.3:
			code = 13
		case v >= 3.15:
			code = 14
		default:
			code = 4*min(max(int((v-3.04)/0.04), 0), 2) + min(int((w-453.5)/0.7), 3)
			s.Good++
		}
		s.Codes[i] = uint16(code)
		s.Counts[code]++
	}
	return s
}
