package binning

import (
	"math"
	"math/rand/v2"
	"strings"
	"testing"

	"epitally/analytics/wafermap"
)

// The integral over an upright rectangle is a product of differences of Φ, which
// the standard library's erfc gives to full precision.
func TestIntegralOverRectangles(t *testing.T) {
	t.Parallel()
	const tolerance = 5e-8
	rng := rand.New(rand.NewPCG(1, 2))
	for range 2000 {
		x1, y1 := 6*rng.Float64()-3, 6*rng.Float64()-3
		x2, y2 := x1+4*rng.Float64(), y1+4*rng.Float64()
		got := plain.integral([]ring{{{x1, y1}, {x2, y1}, {x2, y2}, {x1, y2}}}, point{})
		want := (phi(x2) - phi(x1)) * (phi(y2) - phi(y1))
		if math.Abs(got-want) > tolerance {
			t.Fatalf("[%g, %g] × [%g, %g]: %g, want %g", x1, x2, y1, y2, got, want)
		}
	}
}

// The standard normal holds 1 − exp(−r²/2) inside a circle about its mean; the
// 360-gon inside it has 1 − (π/360)²·2/3 of the area.
func TestIntegralOverACircleAndItsHole(t *testing.T) {
	t.Parallel()
	circle := func(radius float64) (r ring) {
		for i := range 360 {
			sin, cos := math.Sincos(2 * math.Pi * float64(i) / 360)
			r = append(r, point{radius * cos, radius * sin})
		}
		return r
	}
	const tolerance = 5e-5
	inside := func(radius float64) float64 { return 1 - math.Exp(-radius*radius/2) }
	if got := plain.integral([]ring{circle(1.5)}, point{}); math.Abs(got-inside(1.5)) > tolerance {
		t.Errorf("circle: %g, want %g", got, inside(1.5))
	}
	if got, want := plain.integral([]ring{circle(2), circle(1)}, point{}), inside(2)-inside(1); math.Abs(got-want) > tolerance {
		t.Errorf("ring: %g, want %g", got, want)
	}
	stretched := metric{xx: 2, yy: 0.5}
	if got, want := stretched.integral([]ring{{{-1, -1}, {1, -1}, {1, 1}, {-1, 1}}}, point{0.2, -0.3}), (phi(1.6)-phi(-2.4))*(phi(0.65)-phi(-0.35)); math.Abs(got-want) > 5e-8 {
		t.Errorf("stretched: %g, want %g", got, want)
	}
}

// JCGM 106:2012 works conformance probabilities of one-sided and two-sided
// tolerance intervals as Φ (7.3, 7.4): at a limit it is 1/2, 1.645 u inside it is
// 95 % (common tables of Φ).
func TestConformityOnAnAxis(t *testing.T) {
	t.Parallel()
	s := mustParse(t, `specification: edge
kind: pl
uncertainty: {dominant_wavelength_nm: 0.1}
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 455, 460]}
bins: {sellable: [W1]}
`)
	planes := planesOf(t, map[string][]string{"dominant_wavelength_nm": {"452", "455", "454.8355", "450.1", "462", "449.9", ""}})
	codes, counts := make([]uint16, 7), make([]int, len(s.Cells()))
	picked := PickPlanes(s, planes)
	if err := s.Bin(codes, counts, picked, nil); err != nil {
		t.Fatal(err)
	}
	c, err := s.Conformity(codes, picked, nil, nil, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	const tolerance = 2e-5 // 1.645 is Φ⁻¹(0.95) to three decimals
	one := 1 - phi(1)      // one standard uncertainty beyond
	for _, w := range []struct {
		what      string
		got, want float64
	}{
		{"W1 wrongly accepted", c.WronglyAccepted[0], 0.05 + one},
		{"W1 wrongly rejected", c.WronglyRejected[0], 0.5 + one},
		{"W2 wrongly accepted", c.WronglyAccepted[1], 0.5},
		{"W2 wrongly rejected", c.WronglyRejected[1], 0.05},
		{"W1 confident", float64(c.Confident[0]), 2}, // 452 and 454.8355
		{"W2 confident", float64(c.Confident[1]), 0},
	} {
		if math.Abs(w.got-w.want) > tolerance {
			t.Errorf("%s: %g, want %g", w.what, w.got, w.want)
		}
	}
	// A station's uncertainty serves where the specification states none, and no more.
	bare := mustParse(t, strings.Replace(`specification: edge
kind: pl
axes:
  - {axis: W, quantity: dominant_wavelength_nm, edges: [450, 455, 460]}
`, "\t", "", -1))
	exact, _ := bare.Conformity(codes, picked, nil, nil, 0.95)
	station, _ := bare.Conformity(codes, picked, nil, map[string]float64{"dominant_wavelength_nm": 0.1}, 0.95)
	if exact.WronglyAccepted[0] != 0 || exact.Confident[0] != 3 || math.Abs(station.WronglyAccepted[0]-c.WronglyAccepted[0]) > 1e-12 {
		t.Errorf("exact %+v, station %+v", exact, station)
	}
}

// TestConformityAgainstSimulation draws true values and readings, bins both and
// counts the dies that changed sides, which the expectation must meet.
func TestConformityAgainstSimulation(t *testing.T) {
	t.Parallel()
	const u, dies = 0.0008, 400_000
	s := mustParse(t, strings.Replace(manyPolygons(4, 4, ""), "kind: probe", "kind: probe\nuncertainty: {cie_x: 0.0008, cie_y: 0.0008}", 1))
	rng := rand.New(rand.NewPCG(5, 5))
	truth, read := newXY(dies), newXY(dies)
	for i := range dies { // a process that is flat and wide against u
		x, y := 0.29+0.07*rng.Float64(), 0.29+0.06*rng.Float64()
		truth[0].F64[i], truth[1].F64[i] = x, y
		read[0].F64[i], read[1].F64[i] = x+u*rng.NormFloat64(), y+u*rng.NormFloat64()
	}
	trueCodes, codes, counts := make([]uint16, dies), make([]uint16, dies), make([]int, len(s.Cells()))
	if err := s.Bin(trueCodes, counts, PickPlanes(s, truth), nil); err != nil {
		t.Fatal(err)
	}
	if err := s.Bin(codes, counts, PickPlanes(s, read), nil); err != nil {
		t.Fatal(err)
	}
	c, err := s.Conformity(codes, PickPlanes(s, read), nil, nil, 0.95)
	if err != nil {
		t.Fatal(err)
	}
	for bin := range s.bins() {
		accepted, rejected := 0, 0
		for i := range codes {
			if int(codes[i]) == bin && int(trueCodes[i]) != bin {
				accepted++
			}
			if int(codes[i]) != bin && int(trueCodes[i]) == bin {
				rejected++
			}
		}
		for _, w := range []struct{ got, want float64 }{{c.WronglyAccepted[bin], float64(accepted)}, {c.WronglyRejected[bin], float64(rejected)}} {
			if math.Abs(w.got-w.want) > 5*math.Sqrt(w.want)+1 { // five standard deviations of a Poisson count
				t.Errorf("bin %d: expected %.1f, counted %.0f", bin, w.got, w.want)
			}
		}
	}
}

func newXY(dies int) []wafermap.Plane {
	return []wafermap.Plane{
		{Quantity: "cie_x", Encoding: wafermap.Float64, F64: make([]float64, dies)},
		{Quantity: "cie_y", Encoding: wafermap.Float64, F64: make([]float64, dies)},
	}
}

// TestGuardInUncertaintiesIsAsWideAsItSays holds a guard of k u against the same
// distance in the cell's own plane.
func TestGuardInUncertaintiesIsAsWideAsItSays(t *testing.T) {
	t.Parallel()
	spec := func(space, cells string) *Spec {
		return mustParse(t, "specification: g\nkind: probe\nuncertainty: {cie_x: 0.001, cie_y: 0.002}\nregions:\n  - {region: C, space: "+space+", guard: 2 u, cells: ["+cells+"]}\n")
	}
	s := spec("xy", "{name: A, polygon: [[0.3, 0.3], [0.32, 0.3], [0.32, 0.32], [0.3, 0.32]]}")
	r := s.regions[0]
	for _, c := range []struct {
		p    point
		want int
	}{
		{point{0.3019, 0.31}, inGuard}, {point{0.3021, 0.31}, 0}, // 2 u = 0.002 in x
		{point{0.31, 0.3039}, inGuard}, {point{0.31, 0.3041}, 0}, // 2 u = 0.004 in y
		{point{0.2999, 0.31}, outsideCells},
	} {
		if got := r.raster.at(r, c.p); got != c.want {
			t.Errorf("(%g, %g): %d, want %d", c.p.x, c.p.y, got, c.want)
		}
	}
	// In u′, v′ the same errors are carried over by the derivative: the whitened
	// error of many drawn x, y must have a covariance of 1.
	r = spec("uv", "{name: A, polygon: [[0.19, 0.46], [0.21, 0.46], [0.21, 0.48], [0.19, 0.48]]}").regions[0]
	rng := rand.New(rand.NewPCG(2, 2))
	x0, y0 := []float64{0.31}, []float64{0.33}
	toUV(x0, y0)
	m := r.whitening(point{x0[0], y0[0]})
	var xx, xy, yy float64
	const n = 200_000
	for range n {
		x, y := []float64{0.31 + 0.001*rng.NormFloat64()}, []float64{0.33 + 0.002*rng.NormFloat64()}
		toUV(x, y)
		e := m.apply(point{x[0] - x0[0], y[0] - y0[0]})
		xx, xy, yy = xx+e.x*e.x/n, xy+e.x*e.y/n, yy+e.y*e.y/n
	}
	const tolerance = 0.02
	if math.Abs(xx-1) > tolerance || math.Abs(xy) > tolerance || math.Abs(yy-1) > tolerance {
		t.Errorf("whitened covariance %.3f %.3f %.3f", xx, xy, yy)
	}
}
